"""Run lengths of the CUSUM of variances: by simulation, in closed form where there is one, far out.

No printed table is leaned on: none is remembered to the digit.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, optimize

from monitor.methods.runlength.variance_cusum import (
    Way,
    decision_interval,
    reference,
    reference_within,
    run_length,
    tuned_to,
)

SERIES = 20_000


def simulated(
    k: float, h: float, ratio: float, nu: int, side: Way, head_start: float
) -> tuple[float, float]:
    """Mean run length of 20,000 series, and its standard error."""
    rng = np.random.default_rng(11)
    sums, lengths, step = np.full(SERIES, head_start * h), [], 0
    while sums.size:
        step += 1
        y = ratio**2 * rng.chisquare(nu, sums.size) / nu
        sums = np.maximum(0, sums + (y - k if side == "up" else k - y))
        over = sums > h
        lengths.append(np.full(int(over.sum()), step))
        sums = sums[~over]
    found = np.concatenate(lengths)
    return float(found.mean()), float(found.std() / math.sqrt(SERIES))


@pytest.mark.parametrize(
    ("k", "h", "ratio", "nu", "side", "head_start"),
    [
        (1.46, 4, 1.0, 4, "up", 0),
        (1.46, 12, 1.5, 4, "up", 0),
        (1.46, 6, 1.0, 1, "up", 0.5),
        (1.3, 2, 1.0, 9, "up", 0.5),
        (0.65, 1.5, 1.0, 4, "down", 0),
        (0.6, 5, 0.6, 4, "down", 0.5),
        (0.5, 2, 1.0, 1, "down", 0),
        (0.7, 1.9, 1.0, 2, "down", 0.3),
        (0.9, 1.0, 1.0, 29, "down", 0),
    ],
)
def test_against_simulation(
    k: float, h: float, ratio: float, nu: int, side: Way, head_start: float
) -> None:
    mean, error = simulated(k, h, ratio, nu, side, head_start)
    found = run_length(k, h, ratio, nu=nu, side=side, head_start=head_start)
    assert found == pytest.approx(mean, abs=4 * error)


def exponential_run_length(k: float, h: float) -> float:
    """Of subgroups of three, whose variances are exponential: the integral equation becomes
    L′(s) = L(s) − L(s − k) − 1 (S. B. Vardeman & D. Ray 1985, Technometrics 27), with
    L(s) = 1 + L(0) − eˢ up to k; L(0) is such that ∫₀ʰ L(u)e⁻ᵘdu = L(0) − eᵏ."""
    grid = np.linspace(0, h, 200_001)
    step, lag = grid[1], round(float(k / grid[1]))
    assert lag * step == pytest.approx(k)

    def excess(first: float) -> float:
        lengths = 1 + first - np.exp(grid)
        for i in range(lag, grid.size - 1):  # the rule of trapezia, in both L(s) and L(s − k)
            late = (lengths[i - lag] + lengths[i + 1 - lag]) / 2
            lengths[i + 1] = ((1 + step / 2) * lengths[i] - step * (late + 1)) / (1 - step / 2)
        whole = float(integrate.trapezoid(lengths * np.exp(-grid), grid))
        return whole - (first - math.exp(k))

    # Straight in L(0), so that two points give the root.
    one, other = excess(1.0), excess(2.0)
    return 1.0 + one / (one - other)


def test_subgroups_of_three_in_closed_form() -> None:
    assert run_length(1.5, 3.0, nu=2) == pytest.approx(exponential_run_length(1.5, 3.0), rel=1e-4)


@pytest.mark.parametrize(("nu", "ratio"), [(1, 1.5), (4, 1.5), (4, 1 / 1.5), (24, 1.2), (9, 0.5)])
def test_far_out_the_interval_grows_by_its_asymptote(nu: int, ratio: float) -> None:
    """h(A₂) = h(A₁) + ln(A₂/A₁)/θ with E exp(θ·increment) = 1 (A. Wald 1947, Sequential Analysis);
    the root is scipy's."""
    k, side = reference(ratio), "up" if ratio > 1 else "down"
    sign = 1 if ratio > 1 else -1

    def log_mean(theta: float) -> float:
        return -nu / 2 * math.log1p(-2 * sign * theta / nu) - sign * theta * k

    most = nu / 2 * (1 - 1e-9) if ratio > 1 else 1e3
    theta = optimize.brentq(log_mean, 1e-3, most)
    near = decision_interval(k, 1e6, nu=nu, side=side)  # type: ignore[arg-type]
    for wanted in (1e9, 1e12, 1e15):
        grown = near + math.log(wanted / 1e6) / theta
        found = decision_interval(k, wanted, nu=nu, side=side)  # type: ignore[arg-type]
        assert found == pytest.approx(grown, rel=1e-3)


@settings(max_examples=40)
@given(
    st.integers(1, 30),
    st.floats(1.15, 2.5),
    st.sampled_from(["up", "down"]),
    st.floats(2.5, 9),
    st.floats(0, 0.9),
)
def test_the_inverse_gives_back_the_interval(
    nu: int, ratio: float, side: Way, log10: float, head_start: float
) -> None:
    wanted = 10**log10
    k = reference_within(ratio if side == "up" else 1 / ratio, wanted, nu)
    h = decision_interval(k, wanted, nu=nu, side=side, head_start=head_start)
    found = run_length(k, h, nu=nu, side=side, head_start=head_start)
    assert found == pytest.approx(wanted, rel=1e-5)


@settings(max_examples=40)
@given(st.integers(1, 40), st.floats(1.05, 3), st.floats(0.2, 8), st.floats(1, 3))
def test_order(nu: int, k: float, h: float, ratio: float) -> None:
    """A wider spread or a head start signals sooner, a higher h later; at a standstill 1."""
    usual = run_length(k, h, nu=nu)
    assert 1 <= run_length(k, h, ratio, nu=nu) <= usual * (1 + 1e-6)
    assert run_length(k, h, nu=nu, head_start=0.5) <= usual * (1 + 1e-6)
    assert run_length(k, h * 1.1, nu=nu) > usual


@given(st.floats(0.05, 20).filter(lambda r: abs(r - 1) > 1e-3))
def test_what_a_reference_is_tuned_to(ratio: float) -> None:
    """The reference lies between the two variances."""
    k = reference(ratio)
    assert min(1, ratio**2) < k < max(1, ratio**2)
    assert tuned_to(k) == pytest.approx(ratio, rel=1e-6)


def test_the_reference_of_half_as_much_again() -> None:
    """2·ln 1.5·2.25/1.25."""
    assert reference(1.5) == pytest.approx(1.4597, abs=1e-4)


@pytest.mark.parametrize("ratio", [1.3, 2.0, 0.6])
def test_no_other_reference_is_sooner_at_its_ratio(ratio: float) -> None:
    """G. V. Moustakides 1986: the likelihood ratio's CUSUM is optimal."""
    side: Way = "up" if ratio > 1 else "down"

    def delay(k: float) -> float:
        h = decision_interval(k, 1e5, nu=4, side=side)
        return run_length(k, h, ratio, nu=4, side=side)

    best = reference(ratio)
    towards = 1 + 0.7 * (best - 1)
    assert delay(best) < min(delay(towards), delay(best + 0.3 * (best - towards)))


@pytest.mark.parametrize(("nu", "ratio"), [(29, 3.0), (99, 3.0), (99, 0.3)])
def test_a_spread_that_any_subgroup_shows(nu: int, ratio: float) -> None:
    side: Way = "up" if ratio > 1 else "down"
    k = reference_within(ratio, 1000, nu)
    h = decision_interval(k, 1000, nu=nu, side=side)
    assert h > 0
    assert run_length(k, h, ratio, nu=nu, side=side) < 1.2


def test_an_interval_too_high_to_compute_says_so() -> None:
    with pytest.raises(ValueError, match="as far as run lengths are computed"):
        run_length(1.46, 1e6, nu=4)
