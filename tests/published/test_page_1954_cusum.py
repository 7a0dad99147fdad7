"""The integral equation of a one-sided CUSUM's run length, E. S. Page 1954, Biometrika 41, solved
here anew, and intervals printed in D. M. Hawkins 1993, J. Quality Technology 25 (from memory, as
Montgomery's Introduction to Statistical Quality Control repeats them) and in the NIST/SEMATECH
e-Handbook, 6.3.2.3.1 (from memory).

The solution here shares nothing with the project's: composite quadrature, a direct linear solve
and the distribution functions of scipy.
"""

import math

import numpy as np
import pytest
from scipy.stats import norm

from monitor.methods.runlength.cusum import decision_interval, run_length

# k and the h with which a two-sided CUSUM runs 370 points.
HAWKINS = {0.25: 8.01, 0.5: 4.77, 0.75: 3.34, 1.0: 2.52, 1.25: 1.99, 1.5: 1.61}

SHIFTS = (0, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4)
HANDBOOK = {
    4: (336, 26.6, 13.3, 8.38, 4.75, 3.34, 2.62, 2.19, 1.71),
    5: (930, 38.0, 17.0, 10.4, 5.75, 4.01, 3.11, 2.57, 2.01),
}


@pytest.mark.parametrize("k", HAWKINS)
def test_the_interval_printed_for_370(k: float) -> None:
    assert decision_interval(k, 370) == pytest.approx(HAWKINS[k], abs=0.0101)


@pytest.mark.parametrize("h", HANDBOOK)
def test_one_side_within_half_a_percent_of_print(h: float) -> None:
    computed = [run_length(0.5, h, shift, direction="up") for shift in SHIFTS]
    assert computed == pytest.approx(HANDBOOK[h], rel=0.005)


def one_side(k: float, h: float, shift: float, start: float) -> tuple[float, float]:
    """Run lengths of the upper sum from 0 and from ``start``."""
    x, w = np.polynomial.legendre.leggauss(10)
    edges = np.linspace(0, h, math.ceil(h) + 2)
    half = (edges[1:] - edges[:-1])[:, None] / 2
    sums = np.concatenate(([0.0], (edges[:-1, None] + half * (x + 1)).ravel(), [start]))
    moves = np.zeros((sums.size, sums.size))
    moves[:, 0] = norm.cdf(k - shift - sums)
    moves[:, 1:-1] = norm.pdf(sums[1:-1] - sums[:, None] + k - shift) * (half * w).ravel()
    found = np.linalg.solve(np.eye(sums.size) - moves, np.ones(sums.size))
    return float(found[0]), float(found[-1])


def two_sides(k: float, h: float, shift: float, head_start: float) -> float:
    """Sums that are never both high: of the two waits, the first renewed from 0 by the other."""
    (up, up_start), (down, down_start) = (
        one_side(k, h, s, head_start * h) for s in (shift, -shift)
    )
    return (up_start * down + down_start * up - up * down) / (up + down)


@pytest.mark.parametrize("k", [0, 0.05, 0.5, 1, 2])
@pytest.mark.parametrize("h", [0.1, 1, 3, 9])
@pytest.mark.parametrize("head_start", [0, 0.5])
def test_by_the_equation(k: float, h: float, head_start: float) -> None:
    for shift in (-1, 0, 0.05, 0.5, 3):
        start = head_start * h
        alone = one_side(k, h, shift, start)[1]
        if alone > 1e9:  # where a direct solve has lost its digits
            continue
        computed = run_length(k, h, shift, direction="up", head_start=head_start)
        assert computed == pytest.approx(alone, rel=1e-5)
        both = run_length(k, h, shift, head_start=head_start)
        assert both == pytest.approx(two_sides(k, h, shift, head_start), rel=1e-5)


@pytest.mark.parametrize(("k", "h"), [(0, 50), (0.02, 40), (0.1, 25)])
def test_long_sums_by_the_equation(k: float, h: float) -> None:
    for shift in (0, 0.1, 1):
        assert run_length(k, h, shift) == pytest.approx(two_sides(k, h, shift, 0), rel=1e-5)


@pytest.mark.parametrize("k", [0, 0.05, 0.5])
def test_no_step_where_grids_change(k: float) -> None:
    """ln(run length) is smooth in h: of the finer grids nothing is seen."""
    lengths = np.log([run_length(k, h) for h in np.linspace(6, 40, 150)])
    assert np.all(np.diff(lengths) > 0)
    assert np.abs(np.diff(lengths, 3)).max() < 3e-4
