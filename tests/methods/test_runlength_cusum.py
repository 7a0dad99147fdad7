"""Run lengths of the CUSUM: against simulation, against each other, and far out."""

import itertools
import math
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import roots_legendre
from scipy.stats import norm

from monitor.methods.runlength.cusum import decision_interval, run_length, wait

SERIES = 20_000


def simulated(
    k: float, h: float, shift: float, head_start: float, clip: float | None, sides: str
) -> tuple[float, float]:
    """Mean run length of 20,000 series, and its standard error."""
    rng = np.random.default_rng(7)
    upper = np.full(SERIES, head_start * h)
    lower = upper.copy()
    lengths: list[np.ndarray] = []
    step = 0
    while upper.size:
        step += 1
        z = rng.standard_normal(upper.size) + shift
        if clip is not None:
            z = np.clip(z, -clip, clip)
        upper = np.maximum(0, upper + z - k)
        lower = np.maximum(0, lower - z - k)
        over = np.zeros(upper.size, bool)
        if sides != "down":
            over |= upper > h
        if sides != "up":
            over |= lower > h
        lengths.append(np.full(int(over.sum()), step))
        upper, lower = upper[~over], lower[~over]
    found = np.concatenate(lengths)
    return float(found.mean()), float(found.std() / math.sqrt(SERIES))


@pytest.mark.parametrize(
    ("k", "h", "shift", "head_start", "clip", "sides"),
    [
        (0.5, 4, 0, 0, None, "both"),
        (0.5, 4, -0.7, 0, None, "down"),
        (0.25, 6, 0.5, 0.5, None, "both"),
        (1.0, 2.2, 0, 0.5, None, "up"),
        (0.5, 4, 0, 0, 2.0, "both"),
        (0.5, 5, 2, 0, 3.0, "both"),
        (0.25, 6, 0, 0.5, 2.5, "up"),
        (1.0, 2.0, 3, 0, 2.0, "up"),  # two clipped values come to h exactly: no signal
        (0.5, 5, 2, 0.5, 3.0, "up"),
        (0.5, 4, 0, 0.99, None, "both"),  # both sums are high at first
        (0.25, 6, 0, 0.9, None, "both"),
        (0.25, 6, -0.5, 0.8, None, "both"),
        (0, 5, 0.3, 0.7, None, "both"),
        (0.05, 20, 0, 0.9, None, "both"),  # both stay high for hundreds of steps
    ],
)
def test_against_simulation(
    k: float, h: float, shift: float, head_start: float, clip: float | None, sides: str
) -> None:
    mean, error = simulated(k, h, shift, head_start, clip, sides)
    computed = run_length(k, h, shift, direction=sides, head_start=head_start, clip=clip)  # type: ignore[arg-type]
    assert computed == pytest.approx(mean, abs=4 * error)


def by_its_equation(k: float, h: float, shift: float) -> Callable[[np.ndarray], np.ndarray]:
    """Run lengths of the upper sum by itself, from any sums, with scipy."""
    nodes, weights = roots_legendre(60)
    nodes, weights = h / 2 * (nodes + 1), h / 2 * weights

    def moves(origin: np.ndarray) -> np.ndarray:
        to_zero = norm.cdf(k - shift - origin)[:, None]
        onward = norm.pdf(nodes - origin[:, None] + k - shift) * weights
        return np.concatenate((to_zero, onward), axis=1)

    states = np.concatenate(([0.0], nodes))
    lengths = np.linalg.solve(np.eye(states.size) - moves(states), np.ones(states.size))
    return lambda sums: 1 + moves(sums) @ lengths


def followed_to_zero(k: float, h: float, shift: float, start: float) -> float:
    """Run length of both sums from ``start``: followed together, each step with nodes of its own,
    until one of them is 0, from where the other's and its own run length from 0 tell the rest."""
    at, chances, both, total = np.array([start]), np.ones(1), 2 * start, 1.0
    x, w = roots_legendre(60)
    upper, lower = by_its_equation(k, h, shift), by_its_equation(k, h, -shift)
    up, down = upper(np.zeros(1))[0], lower(np.zeros(1))[0]

    def arriving(low: float, high: float) -> tuple[np.ndarray, np.ndarray]:
        to, half = low + (high - low) / 2 * (x + 1), (high - low) / 2
        return to, (chances @ norm.pdf(to - at[:, None] + k - shift)) * half * w

    while chances.sum() > 1e-12:
        both -= 2 * k
        low = max(both, 0.0)
        if low < h:
            to, chance = arriving(low, h)
            total += chance @ upper(to) * down / (up + down)
            to, chance = arriving(both - h, both - low)
            total += chance @ lower(both - to) * up / (up + down)
        if both <= 0:
            return float(total + arriving(both, 0.0)[1].sum() * up * down / (up + down))
        at, chances = arriving(max(0.0, both - h), min(h, both))
        total += chances.sum()
    return float(total)


@pytest.mark.parametrize(
    ("k", "h", "shift", "head_start"),
    [
        (0.5, 5, 0, 0.9),
        (0.5, 4, 0.7, 0.8),
        (0.2, 8, 0, 0.7),
        (0.2, 8, -0.3, 0.95),
        (1.0, 3, 0, 0.99),
        (1.0, 3, 0, 0.8),  # one step, and they are no longer both high
        (0.05, 6, 0.1, 0.75),
    ],
)
def test_two_sums_that_begin_high_against_following_both(
    k: float, h: float, shift: float, head_start: float
) -> None:
    expected = followed_to_zero(k, h, shift, head_start * h)
    assert run_length(k, h, shift, head_start=head_start) == pytest.approx(expected, rel=1e-7)


def test_of_two_high_sums_one_may_never_signal() -> None:
    """At a shift of 20 the lower sum's run length from 0 exceeds a float."""
    assert run_length(0.5, 5, 20, head_start=0.9) == pytest.approx(1)
    assert run_length(0.5, 5, -20, head_start=0.9) == pytest.approx(1)


@settings(max_examples=25)
@given(st.floats(0.05, 1.0), st.floats(1, 15), st.floats(-1, 1))
def test_a_higher_head_start_signals_sooner(k: float, h: float, shift: float) -> None:
    lengths = [run_length(k, h, shift, head_start=each) for each in (0.5, 0.55, 0.7, 0.9, 0.99)]
    assert all(sooner < later for later, sooner in itertools.pairwise(lengths))
    # On one side alone it takes longer than on both.
    assert lengths[-1] < run_length(k, h, shift, direction="up", head_start=0.99)


@pytest.mark.parametrize(
    ("k", "wanted", "h"),
    [
        (0.25, 1e4, 14.492),
        (0.25, 1e6, 23.695),
        (0.25, 1e7, 28.300),
        (0.5, 1e4, 8.053),
        (0.5, 1e6, 12.657),
        (0.5, 1e7, 14.960),
        (1.0, 1e4, 4.160),
        (1.0, 1e6, 6.463),
        (1.0, 1e7, 7.614),
    ],
)
def test_decision_intervals_computed_elsewhere(k: float, wanted: float, h: float) -> None:
    """Two-sided, by an independent solution of the integral equation."""
    assert decision_interval(k, wanted) == pytest.approx(h, abs=0.0006)


@pytest.mark.parametrize("k", [0.25, 0.5, 1.0])
def test_far_out_the_interval_grows_by_its_asymptote(k: float) -> None:
    """h(A₂) = h(A₁) + ln(A₂/A₁)/2k for the normal (D. Siegmund 1985, Sequential Analysis)."""
    near = decision_interval(k, 1e9)
    for wanted in (1e12, 1e15, 1e18):
        grown = near + math.log(wanted / 1e9) / (2 * k)
        assert decision_interval(k, wanted) == pytest.approx(grown, abs=1e-5)


@settings(max_examples=40)
@given(
    st.floats(0.1, 1.5),
    st.floats(2, 12),
    st.sampled_from(["both", "up", "down"]),
    st.floats(0, 0.9),
    st.floats(-0.05, 0.05),
)
def test_the_inverse_gives_back_the_interval(
    k: float, log10: float, direction: str, head_start: float, ignored: float
) -> None:
    wanted = 10**log10
    options = {"direction": direction, "head_start": head_start}
    h = decision_interval(k, wanted, ignored, **options)  # type: ignore[arg-type]
    assert run_length(k, h, ignored, **options) == pytest.approx(wanted, rel=1e-6)  # type: ignore[arg-type]


@settings(max_examples=40)
@given(st.floats(0.1, 1.5), st.floats(0.5, 12), st.floats(0, 3))
def test_order(k: float, h: float, shift: float) -> None:
    """Two sides signal sooner than one, a head start sooner than none, a higher h later."""
    one = run_length(k, h, shift, direction="up")
    assert 1 <= run_length(k, h, shift) <= one * (1 + 1e-9)
    assert run_length(k, h, shift, direction="up", head_start=0.5) <= one * (1 + 1e-9)
    assert run_length(k, h * 1.1, shift, direction="up") > one * (1 - 1e-9)


def test_a_wide_clip_changes_nothing() -> None:
    assert run_length(0.5, 5, 0.3, clip=7.0) == pytest.approx(run_length(0.5, 5, 0.3), rel=1e-3)


def test_a_clip_lengthens_the_interval_and_its_inverse_allows_for_it() -> None:
    h = decision_interval(0.5, 1e4, clip=3.0)
    assert h < decision_interval(0.5, 1e4)
    assert run_length(0.5, h, clip=3.0) == pytest.approx(1e4, rel=1e-4)


def test_where_the_run_length_jumps_past_the_wanted_it_is_no_shorter() -> None:
    """Values at a clip just above k take a sum up in equal steps, each of which is a jump."""
    h = decision_interval(1.5, 1e3, clip=1.8)
    assert 1e3 < run_length(1.5, h, clip=1.8) < 1e4
    assert run_length(1.5, h * (1 - 1e-6), clip=1.8) < 1e3
    h = decision_interval(1.0, 500.0, clip=2.0)
    assert h == pytest.approx(2 * (2.0 - 1.0), abs=1e-6)
    mean, error = simulated(1.0, h, 0, 0, 2.0, "both")
    assert mean - 4 * error < run_length(1.0, h, clip=2.0) < mean + 4 * error


def test_a_clip_delays_signals() -> None:
    """Nine steps of 0.5 at most to a sum above 4.4: the median wait by simulation as well."""
    rng = np.random.default_rng(3)
    upper, over = np.zeros(SERIES), np.zeros(SERIES, bool)
    left = []
    for _ in range(20):
        upper = np.maximum(0, upper + np.minimum(rng.standard_normal(SERIES) + 1, 1.0) - 0.5)
        over |= upper > 4.4
        left.append(1 - over.mean())
    computed = list(itertools.islice(wait(0.5, 4.4, 1.0, clip=1.0), 20))
    assert computed[:8] == pytest.approx([1.0] * 8)
    assert computed == pytest.approx(left, abs=0.02)


def test_a_clip_below_k_never_rises() -> None:
    with pytest.raises(ValueError, match="never rise"):
        run_length(0.5, 5, clip=0.5)


def test_beyond_a_float_is_inf() -> None:
    assert run_length(0.5, 5, -60, direction="up") == math.inf


def test_no_interval_is_shorter_than_that_of_no_decision() -> None:
    with pytest.raises(ValueError, match="no setting"):
        decision_interval(0.5, 1.01)


def test_a_shift_beyond_k_cannot_be_ignored_for_long() -> None:
    with pytest.raises(ValueError, match="no setting"):
        decision_interval(0.5, 1e12, 1.0)


def test_an_interval_too_high_to_compute_says_so() -> None:
    with pytest.raises(ValueError, match="as far as run lengths are computed"):
        run_length(0.5, 1e9)


@pytest.mark.parametrize(
    ("k", "h", "head_start"), [(0.5, 5.0, 0.9), (0.5, 5.0, 0.75), (1.0, 3.0, 0.9)]
)
def test_two_high_clipped_sums_are_told_to_ring_a_little_too_often(
    k: float, h: float, head_start: float
) -> None:
    mean, error = simulated(k, h, 0.0, head_start, 3.0, "both")
    computed = run_length(k, h, head_start=head_start, clip=3.0)
    assert 0.9 * mean - 3 * error < computed < mean + 3 * error


@pytest.mark.parametrize(("k", "h", "clip"), [(0.25, 8.0, 3.0), (0.01, 100.0, None)])
def test_two_high_sums_that_cannot_be_followed_are_refused(
    k: float, h: float, clip: float | None
) -> None:
    with pytest.raises(ValueError, match=r"head start of 0\.9"):
        run_length(k, h, head_start=0.9, clip=clip)
    assert run_length(k, h, head_start=0.9, clip=clip, direction="up") > 1
    assert run_length(k, h, head_start=0.5, clip=clip) > 1
