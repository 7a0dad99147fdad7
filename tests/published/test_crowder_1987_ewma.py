"""Average run lengths of the two-sided EWMA, S. V. Crowder 1987, Technometrics 29: the table for
limits of 3 standard errors (from memory), and the paper's integral equation solved here anew.

The solution here shares nothing with the project's: composite quadrature, a direct linear solve and
the distribution functions of scipy. Limits that settle are followed point by point from the start.
"""

import math

import numpy as np
import pytest
from scipy.stats import norm

from monitor.methods.runlength.ewma import best_weight, run_length, width_for

WEIGHTS = (1, 0.75, 0.5, 0.25, 0.1, 0.05)
PRINTED = {
    0: (370.40, 374.50, 397.46, 502.90, 842.15, 1379.35),
    0.5: (155.22, 110.95, 75.35, 48.45, 37.41, 37.33),
    1: (43.89, 25.64, 15.74, 11.15, 11.38, 13.52),
    2: (6.30, 4.15, 3.47, 3.62, 4.67, 6.00),
}


@pytest.mark.parametrize("shift", PRINTED)
def test_to_the_printed_digits(shift: float) -> None:
    computed = [run_length(lam, 3, shift, asymptotic=True) for lam in WEIGHTS]
    assert computed == pytest.approx(PRINTED[shift], abs=0.0101)


def panels(low: float, high: float, widest: float) -> tuple[np.ndarray, np.ndarray]:
    """Ten nodes in each of even panels no wider than ``widest``, and their weights."""
    x, w = np.polynomial.legendre.leggauss(10)
    edges = np.linspace(low, high, max(2, math.ceil((high - low) / widest)) + 1)
    half = (edges[1:] - edges[:-1])[:, None] / 2
    return (edges[:-1, None] + half * (x + 1)).ravel(), (half * w).ravel()


def to_nodes(z: np.ndarray, lam: float, shift: float, at: tuple[np.ndarray, np.ndarray]):
    """Probabilities to move from each average ``z`` to each node."""
    return norm.pdf((at[0] - (1 - lam) * z[:, None]) / lam, shift) / lam * at[1]


def settled(lam: float, limit: float, shift: float) -> tuple[tuple, np.ndarray]:
    nodes = panels(-limit, limit, lam)
    moves = to_nodes(nodes[0], lam, shift, nodes)
    return nodes, np.linalg.solve(np.eye(len(moves)) - moves, np.ones(len(moves)))


def by_the_equation(lam: float, width: float, shift: float) -> float:
    nodes, onward = settled(lam, width * math.sqrt(lam / (2 - lam)), shift)
    return 1 + float((to_nodes(np.zeros(1), lam, shift, nodes) @ onward)[0])


def point_by_point(lam: float, width: float, shift: float) -> float:
    limit = width * math.sqrt(lam / (2 - lam))
    nodes, onward = settled(lam, limit, shift)
    at, chances, total, short = np.zeros(1), np.ones(1), 0.0, 1.0
    while short > 1e-6:
        total += float(chances.sum())
        short *= (1 - lam) ** 2
        now = limit * math.sqrt(1 - short)
        following = nodes if short <= 1e-6 else panels(-now, now, lam)
        chances = chances @ to_nodes(at, lam, shift, following)
        at = following[0]
    return total + float(chances @ onward)


@pytest.mark.parametrize("lam", [0.003, 0.01, 0.05, 0.2, 0.6, 0.97])
@pytest.mark.parametrize("width", [0.5, 2, 4, 5.5])
def test_settled_limits_by_the_equation(lam: float, width: float) -> None:
    for shift in (0, 0.05, 0.5, -1, 3):
        expected = by_the_equation(lam, width, shift)
        assert run_length(lam, width, shift, asymptotic=True) == pytest.approx(expected, rel=1e-5)


@pytest.mark.parametrize(
    ("lam", "width"), [(0.03, 2.2), (0.05, 0.5), (0.1, 1.5), (0.2, 2.9), (0.5, 0.5), (0.5, 5)]
)
def test_exact_limits_point_by_point(lam: float, width: float) -> None:
    for shift in (0, -0.5, 2):
        expected = point_by_point(lam, width, shift)
        assert run_length(lam, width, shift) == pytest.approx(expected, rel=1e-3)


@pytest.mark.parametrize("wanted", [50, 500, 1e4, 1e6])
@pytest.mark.parametrize("catch", [0.3, 1, 3])
def test_the_solved_detector_by_the_equation(catch: float, wanted: float) -> None:
    lam = best_weight(catch, wanted)
    width = width_for(lam, wanted, asymptotic=True)
    assert by_the_equation(lam, width, 0) == pytest.approx(wanted, rel=1e-4)
    at_catch = by_the_equation(lam, width, catch)
    for other in (0.6 * lam, min(1.0, 1.6 * lam)):
        slower = by_the_equation(other, width_for(other, wanted, asymptotic=True), catch)
        assert at_catch < slower * 1.002


@pytest.mark.parametrize("asymptotic", [True, False])
def test_no_step_where_grids_change(asymptotic: bool) -> None:
    """ln(run length) is smooth in the weight: of the finest grids' changes nothing is seen."""
    lams = np.geomspace(0.02, 1, 120)
    logs = np.log([run_length(lam, 2.5, asymptotic=asymptotic) for lam in lams])
    assert np.all(np.diff(logs) < 0)
    assert np.abs(np.diff(logs, 3)).max() < 2e-4
