"""The EWMA, against its weights written out over the whole history at every point."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import fresh, rules, steps, subgroup

from monitor.plan import EwmaPlan, Side

MEAN, SIGMA, BETWEEN = 340.0, 2.0, 0.5

sizes_and_means = st.lists(
    st.tuples(st.integers(1, 6), st.floats(-6, 6, width=16)), min_size=1, max_size=30
)


def written_out(inputs: list[float], errors: list[float], lam: float) -> tuple[float, float]:
    """The average of what came since the start, and its standard deviation (S. W. Roberts 1959)."""
    last = len(inputs) - 1
    weights = [lam * (1 - lam) ** (last - i) for i in range(len(inputs))]
    average = sum(w * x for w, x in zip(weights, inputs, strict=True))
    average += (1 - sum(weights)) * MEAN
    variance = sum((w * e) ** 2 for w, e in zip(weights, errors, strict=True))
    return average, math.sqrt(variance)


@given(
    sizes_and_means,
    st.sampled_from([0.05, 0.2, 0.5, 1.0]),
    st.sampled_from([1.0, 2.7, 3.0]),
    st.booleans(),
    st.sampled_from([None, 2.0]),
)
def test_average_limits_and_signals_are_what_the_definition_says(
    points: list[tuple[int, float]], lam: float, width: float, hold: bool, clip: float | None
) -> None:
    plan = EwmaPlan("mean", lam, width, clip=clip, hold=hold)
    ewma = fresh(plan, MEAN, SIGMA, BETWEEN)
    inputs: list[float] = []
    errors: list[float] = []
    for size, z in points:
        error = math.sqrt(BETWEEN**2 + SIGMA**2 / size)
        errors.append(error)
        inputs.append(MEAN + error * (z if clip is None else min(max(z, -clip), clip)))
        signals = ewma.step(subgroup(*[MEAN + error * z] * size))
        average, sd = written_out(inputs, errors, lam)
        (row,) = ewma.rows("it", signals)
        assert row.value == pytest.approx(average, abs=1e-9)
        assert (row.lower, row.centre, row.upper) == pytest.approx(
            (MEAN - width * sd, MEAN, MEAN + width * sd), abs=1e-9
        )
        reach = (average - MEAN) / (width * sd)
        if abs(abs(reach) - 1) > 1e-9:  # closer than that rounding decides
            expected = ["ewma-upper" if reach > 0 else "ewma-lower"] * (abs(reach) > 1)
            assert rules(signals) == list(row.rules) == expected
        if signals and not hold:
            inputs.clear()
            errors.clear()


def test_the_exact_limits_of_a_constant_size_are_the_published_ones() -> None:
    # σ²·λ/(2−λ)·(1−(1−λ)²ⁱ), S. W. Roberts 1959.
    lam, width = 0.3, 2.5
    ewma = fresh(EwmaPlan("individual", lam, width), sigma=1.5)
    for i in range(1, 60):
        ewma.step(subgroup(0.0))
        (row,) = ewma.rows("it", ())
        variance = 1.5**2 * lam / (2 - lam) * (1 - (1 - lam) ** (2 * i))
        assert row.upper == pytest.approx(width * math.sqrt(variance))


def test_asymptotic_limits_are_the_same_from_the_first_point() -> None:
    lam, width = 0.3, 2.5
    ewma = fresh(EwmaPlan("mean", lam, width, asymptotic=True), sigma=1.5)
    for size in (4, 4, 9):
        ewma.step(subgroup(*[0.0] * size))
        (row,) = ewma.rows("it", ())
        assert row.upper == pytest.approx(width * 1.5 / math.sqrt(size) * math.sqrt(lam / 1.7))


def test_the_first_average_starts_from_the_mean() -> None:
    ewma = fresh(EwmaPlan("individual", 0.25, 3.0), mean=10.0)
    ewma.step(subgroup(12.0))
    assert ewma.rows("it", ())[0].value == 0.25 * 12.0 + 0.75 * 10.0


def test_after_a_signal_the_average_is_at_the_mean_and_its_limits_begin_again() -> None:
    ewma = fresh(EwmaPlan("individual", 0.5, 2.0))
    (signal,) = ewma.step(subgroup(3.0))
    ewma.step(subgroup(1.0))
    (row,) = ewma.rows("it", ())
    assert row.value == 0.5
    assert row.upper == signal.upper


def test_hold_goes_on_averaging() -> None:
    ewma = fresh(EwmaPlan("individual", 0.5, 2.0, hold=True))
    ewma.step(subgroup(4.0))
    assert rules(ewma.step(subgroup(4.0))) == ["ewma-upper"]
    assert ewma.rows("it", ())[0].value == 3.0


@given(st.lists(st.floats(-4, 4, width=16), max_size=30), st.sampled_from(["up", "down"]))
def test_the_other_direction_neither_signals_nor_restarts(
    values: list[float], direction: Side
) -> None:
    # The held chart signals where the restarted one does until the first signal wanted.
    wanted = {"up": "ewma-upper", "down": "ewma-lower"}[direction]
    one = [
        rules(s)
        for s in steps(fresh(EwmaPlan("individual", 0.2, 1.5, direction=direction)), values)
    ]
    held = [rules(s) for s in steps(fresh(EwmaPlan("individual", 0.2, 1.5, hold=True)), values)]
    first = next((i for i, met in enumerate(held) if wanted in met), len(values))
    assert one[: first + 1] == [[r for r in met if r == wanted] for met in held[: first + 1]]
    assert {rule for met in one for rule in met} <= {wanted}


def test_restarting_forgets_and_shows_nothing() -> None:
    ewma = fresh(EwmaPlan("individual", 0.25, 3.0))
    ewma.step(subgroup(2.0))
    ewma.restart()
    assert ewma.rows("it", ()) == ()
    ewma.step(subgroup(2.0))
    assert ewma.rows("it", ())[0].value == 0.5


@given(st.lists(st.floats(-1e100, 1e100), min_size=1, max_size=20))
def test_absurd_values_leave_the_average_a_number(values: list[float]) -> None:
    ewma = fresh(EwmaPlan("individual", 0.2, 3.0, hold=True), sigma=1e-100)
    for value in values:
        signals = ewma.step(subgroup(value))
        assert all(math.isfinite(row.value) for row in ewma.rows("it", signals))
