"""Points of the range, by scipy and by print."""

import math

import numpy as np
import pytest
from scipy import stats

from monitor.methods.ranges import range_cdf, range_lower_point, range_sf, range_upper_point


@pytest.mark.parametrize("n", [2, 3, 5, 12])
@pytest.mark.parametrize("p", [0.3, 0.02275, 0.00135])
def test_points_by_the_studentized_range_of_infinite_freedom(n: int, p: float) -> None:
    reference = stats.studentized_range(n, np.inf)
    assert reference.sf(range_upper_point(p, n)) == pytest.approx(p, rel=1e-7)
    assert reference.cdf(range_lower_point(p, n)) == pytest.approx(p, rel=1e-7)


@pytest.mark.parametrize("p", [0.4, 1e-3, 1e-8, 1e-15, 1e-23])
def test_the_range_of_two_is_a_normal_folded(p: float) -> None:
    folded = math.sqrt(2) * stats.halfnorm.isf(p)
    assert range_upper_point(p, 2) == pytest.approx(folded, rel=1e-9)
    assert range_lower_point(p, 2) == pytest.approx(p * math.sqrt(math.pi), rel=max(p, 1e-6))


@pytest.mark.parametrize("n", [2, 4, 25, 200])
@pytest.mark.parametrize("p", [0.4, 1e-3, 1e-8, 1e-15, 1e-23])
def test_a_point_is_where_its_tail_is(n: int, p: float) -> None:
    assert range_sf(np.array([range_upper_point(p, n)]), n)[0] == pytest.approx(p, rel=1e-8)
    assert range_cdf(np.array([range_lower_point(p, n)]), n)[0] == pytest.approx(p, rel=1e-5)


def test_printed_points() -> None:
    """H. L. Harter 1960, Annals of Mathematical Statistics 31 (tables of range); the last two are
    the outer limits of the probability charts of BS 2564 for fives. All from memory."""
    printed = {
        (2, 0.05): 2.772,
        (3, 0.05): 3.314,
        (5, 0.05): 3.858,
        (10, 0.05): 4.474,
        (5, 0.01): 4.603,
        (10, 0.01): 5.157,
    }
    for (n, p), value in printed.items():
        assert range_upper_point(p, n) == pytest.approx(value, abs=0.0006)
    assert range_upper_point(0.001, 5) == pytest.approx(5.48, abs=0.006)
    assert range_lower_point(0.001, 5) == pytest.approx(0.37, abs=0.006)


@pytest.mark.parametrize("n", [3, 6])
def test_a_narrow_range_loses_no_digits(n: int) -> None:
    """P(R ≤ w) → √n·(w/√2π)ⁿ⁻¹ for small w: the density of n equal values, integrated."""
    for w in (1e-4, 9e-6, 1e-7):
        expected = math.sqrt(n) * (w / math.sqrt(2 * math.pi)) ** (n - 1)
        assert range_cdf(np.array([w]), n)[0] == pytest.approx(expected, rel=1e-6)
