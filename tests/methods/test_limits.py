"""Limits of spread charts: closed forms for two, and what must hold for any n."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.methods.limits import moving_range_limits, range_limits, sd_limits, variance_limits

sizes = st.integers(2, 200)
widths = st.floats(0.1, 6)


def test_the_range_of_two_has_a_closed_form() -> None:
    centre, spread = 2 / math.sqrt(math.pi), math.sqrt(2 - 4 / math.pi)
    limits = range_limits(2, 10.0, 3)
    assert limits.centre == pytest.approx(10 * centre, rel=1e-12)
    assert limits.upper == pytest.approx(10 * (centre + 3 * spread), rel=1e-12)
    assert limits.lower == 0
    assert moving_range_limits(10.0, 3) == limits


def test_a_large_subgroup_has_a_lower_limit() -> None:
    assert range_limits(7, 1.0, 3).lower > 0
    assert range_limits(6, 1.0, 3).lower == 0
    assert sd_limits(6, 1.0, 3).lower > 0
    assert sd_limits(5, 1.0, 3).lower == 0


@given(sizes, widths, st.floats(1e-6, 1e6))
def test_limits_scale_with_sigma_and_enclose_the_centre(n: int, width: float, sigma: float) -> None:
    for limits in (range_limits, sd_limits):
        one, scaled = limits(n, 1.0, width), limits(n, sigma, width)
        assert 0 <= one.lower < one.centre < one.upper
        assert scaled == pytest.approx([x * sigma for x in one], rel=1e-12)


@pytest.mark.parametrize("n", [0, 1])
def test_a_subgroup_of_one_has_no_spread(n: int) -> None:
    for limits in (range_limits, sd_limits, variance_limits):
        with pytest.raises(ValueError, match="it takes 2 or more"):
            limits(n, 1.0, 3)


@given(st.integers(2, 40), st.floats(0.5, 8), st.floats(1e-6, 1e6))
def test_exact_limits_are_crossed_as_often_as_those_of_a_normal(
    n: int, width: float, sigma: float
) -> None:
    """ISO 7870-2's variance chart by chi-squared; scipy is the reference."""
    tail, square = stats.norm.sf(width), stats.chi2(n - 1)
    variance, sd = variance_limits(n, sigma, width), sd_limits(n, sigma, width, exact=True)
    assert square.sf(variance.upper / sigma**2 * (n - 1)) == pytest.approx(tail, rel=1e-6)
    assert square.cdf(variance.lower / sigma**2 * (n - 1)) == pytest.approx(tail, rel=1e-6)
    assert sd[1:] == pytest.approx([math.sqrt(x) for x in variance[1:]], rel=1e-12)
    assert variance.centre == pytest.approx(sigma**2)
    moved = moving_range_limits(sigma, width, exact=True)
    two = range_limits(2, sigma, width, exact=True)
    assert moved.upper == pytest.approx(two.upper, rel=1e-9)
    assert moved.lower == pytest.approx(two.lower, rel=1e-6, abs=1e-15 * sigma)


@given(st.integers(2, 40), st.floats(1.5, 8))
def test_exact_limits_are_not_symmetric(n: int, width: float) -> None:
    """The lower one is above 0 always, the upper farther off than the lower."""
    for limits in (
        range_limits(n, 1.0, width, exact=True),
        sd_limits(n, 1.0, width, exact=True),
        variance_limits(n, 1.0, width),
        moving_range_limits(1.0, width, exact=True),
    ):
        assert 0 < limits.lower < limits.upper
        assert limits.upper - limits.centre > limits.centre - limits.lower


@pytest.mark.parametrize("width", [0.0, 10.5, math.inf])
def test_no_exact_limits_at_an_absurd_width(width: float) -> None:
    with pytest.raises(ValueError, match="up to 10"):
        variance_limits(5, 1.0, width)
