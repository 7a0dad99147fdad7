"""Constants of subgroup statistics: closed forms, the largest n, and seams between methods."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special

from monitor.methods.constants import c4, c5, d2, d3, median_se
from monitor.methods.ranges import range_sf


@given(st.integers(2, 1_000_000))
def test_neighbouring_c4_multiply_to_an_exact_root(n: int) -> None:
    """Γ cancels: c4(n)·c4(n+1) = √((n−1)/n), across the seam between the two formulas too."""
    assert c4(n) * c4(n + 1) == pytest.approx(math.sqrt((n - 1) / n), rel=2e-12)


def test_c5_keeps_its_digits_for_large_subgroups() -> None:
    assert c5(1_000_000) == pytest.approx(1 / math.sqrt(2_000_000), rel=1e-6)


def test_closed_forms_of_the_range() -> None:
    assert d2(2) == pytest.approx(2 / math.sqrt(math.pi), rel=1e-12)
    assert d2(3) == pytest.approx(3 / math.sqrt(math.pi), rel=1e-12)
    assert d3(2) == pytest.approx(math.sqrt(2 - 4 / math.pi), rel=1e-12)


@pytest.mark.parametrize("n", [30, 100, 1000, 20_000])
def test_the_range_of_a_large_subgroup_by_independent_integration(n: int) -> None:
    def beyond(x: float) -> float:
        return -math.expm1(n * special.log_ndtr(x)) - math.exp(n * special.log_ndtr(-x))

    mean, _ = integrate.quad(beyond, -12, 12, epsabs=1e-12, limit=200, points=[-4, 0, 4])
    assert d2(n) == pytest.approx(mean, rel=1e-10)


def test_the_tail_of_the_range_keeps_its_digits() -> None:
    """Two values: the range is |N(0, 2)|."""
    w = np.array([0.0, 0.1, 1.0, 5.0, 12.0, 16.0])
    exact = special.erfc(w / 2)
    assert range_sf(w, 2) == pytest.approx(exact, rel=1e-10)


@settings(max_examples=30)
@given(st.integers(2, 60))
def test_constants_move_one_way_with_the_subgroup(n: int) -> None:
    assert c4(n) < c4(n + 1) < 1
    assert d2(n) < d2(n + 1)
    assert d3(n) > d3(n + 1) or n == 2  # d3 rises once, from two to three
    assert median_se(n) > median_se(n + 1)


def test_closed_forms_of_the_median() -> None:
    assert median_se(1) == pytest.approx(1, rel=1e-12)
    assert median_se(2) == pytest.approx(math.sqrt(0.5), rel=1e-12)
    assert median_se(3) == pytest.approx(math.sqrt(1 - math.sqrt(3) / math.pi), rel=1e-12)


@pytest.mark.parametrize("n", [5, 25, 401])
def test_an_odd_median_by_independent_integration(n: int) -> None:
    m = n // 2
    log_c = special.gammaln(n + 1) - 2 * special.gammaln(m + 1) - math.log(2 * math.pi) / 2

    def moment(x: float) -> float:
        order = m * (special.log_ndtr(x) + special.log_ndtr(-x))
        return x * x * math.exp(log_c + order - x * x / 2)

    variance, _ = integrate.quad(moment, -9, 9, epsabs=1e-14, points=[-0.2, 0, 0.2])
    assert median_se(n) == pytest.approx(math.sqrt(variance), rel=1e-9)


@pytest.mark.parametrize("n", [4, 10, 40])
def test_an_even_median_by_independent_integration(n: int) -> None:
    m = n // 2
    log_c = special.gammaln(n + 1) - 2 * special.gammaln(m) - math.log(2 * math.pi)

    def moment(y: float, x: float) -> float:
        order = (m - 1) * (special.log_ndtr(x) + special.log_ndtr(-y))
        return ((x + y) / 2) ** 2 * math.exp(log_c + order - (x * x + y * y) / 2)

    variance, _ = integrate.dblquad(moment, -8, 8, lambda x: x, lambda x: 8, epsabs=1e-10)
    assert median_se(n) == pytest.approx(math.sqrt(variance), rel=1e-7)


def test_the_median_of_very_many_is_that_of_the_limit() -> None:
    assert median_se(10_001) * math.sqrt(10_001) == pytest.approx(math.sqrt(math.pi / 2), rel=1e-4)


def test_a_subgroup_too_small_says_so() -> None:
    for constant in (c4, d2, d3):
        with pytest.raises(ValueError, match="it takes 2 or more"):
            constant(1)
