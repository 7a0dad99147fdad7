"""Skewness, tails and steps, against scipy."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.methods.shape import shape, skewed_sf, smallest_step, tilt


def test_the_moments_are_those_of_scipy() -> None:
    values = np.random.default_rng(1).gamma(3.0, size=500)
    found = shape(values)

    assert found is not None
    assert found.skewness == pytest.approx(stats.skew(values))
    assert found.kurtosis == pytest.approx(stats.kurtosis(values))
    # scipy's test of normality uses the exact error of normal samples; ours is its first order.
    exact = stats.skew(values) / stats.skewtest(values).statistic
    assert found.skewness_error == pytest.approx(math.sqrt(6 / 500))
    assert exact > 0


def test_nothing_that_varies_has_no_shape() -> None:
    assert shape(np.ones(10)) is None
    assert shape(np.array([1.0, 2.0])) is None


@given(st.sampled_from([-1.0, -0.5, 0.2, 0.5, 1.0, 2.0**0.5]), st.floats(0.5, 6))
def test_the_skewed_tail_is_pearsons_type_three(skewness: float, width: float) -> None:
    freedom = round(8 / skewness**2)
    exactly = math.copysign(math.sqrt(8 / freedom), skewness)  # whole degrees of freedom
    expected = stats.pearson3(exactly).sf(width)

    assert skewed_sf(width, skewness) == pytest.approx(expected, rel=1e-6, abs=1e-15)


def test_without_skewness_the_tail_is_normal() -> None:
    assert skewed_sf(3.0, 0.0) == pytest.approx(stats.norm.sf(3.0))


@pytest.mark.parametrize("skewness", [0.0, 0.3, -0.3, 1.0])
def test_the_tilt_balances_the_moment_generating_function(skewness: float) -> None:
    theta = tilt(0.5, skewness)
    distribution = stats.pearson3(skewness) if skewness else stats.norm
    grid = np.linspace(-12, 40, 400_001)
    product = np.exp(theta * (grid - 0.5)) * distribution.pdf(grid)

    assert np.trapezoid(product, grid) == pytest.approx(1, abs=1e-3)
    assert theta > 0


def test_the_smallest_step() -> None:
    grid = np.round(np.random.default_rng(2).normal(341.2, 1.9, 5000) / 0.2) * 0.2

    assert smallest_step(grid) == pytest.approx(0.2)
    assert smallest_step(np.ones(5)) == 0
