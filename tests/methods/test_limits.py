"""Limits of spread charts: closed forms for two, and what must hold for any n."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.methods.limits import moving_range_limits, range_limits, sd_limits

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
    for limits in (range_limits, sd_limits):
        with pytest.raises(ValueError, match="it takes 2 or more"):
            limits(n, 1.0, 3)
