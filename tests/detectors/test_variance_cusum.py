"""The CUSUM of variances, against its sums worked out anew from the whole history at every point,
and what it tells of a spread that changed.

Readings are quarters about 0, sigma 1 and constants eighths, so that no sum is rounded.
"""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import START, fresh, rules, subgroup

from monitor.detectors import Signal
from monitor.plan import CusumPlan, Side
from monitor.times import SECOND

pairs = st.lists(st.integers(-12, 12).map(lambda n: n / 4), min_size=1, max_size=40)
"""Half the distance of the two readings of a subgroup: a variance of twice its square."""

BOTH = CusumPlan("variance", 1.5, 6.0, 0.5, k_lower=0.625, h_lower=2.0, size=2)


def variances(halves: list[float]) -> list[float]:
    return [2 * half * half for half in halves]


def naive(inputs: list[float], h: float, start: float, hold: bool) -> list[tuple[float, bool]]:
    """(sum, whether it signals) at each input already less k: the largest of 0, what any tail adds
    up to, and the start with all since the last signal."""
    found, since, begin = [], 0, start
    for end in range(1, len(inputs) + 1):
        part = inputs[since:end]
        value = max(0.0, begin + sum(part), *(sum(part[i:]) for i in range(len(part))))
        found.append((value, value > h))
        if value > h and not hold:
            since, begin = end, start
    return found


@given(pairs, st.booleans(), st.sampled_from([0.0, 0.5]))
def test_both_sums_are_what_their_definition_says(
    halves: list[float], hold: bool, head_start: float
) -> None:
    plan = CusumPlan("variance", 1.5, 6.0, head_start, None, hold, "both", 0.625, 2.0, 2)
    cusum = fresh(plan)
    upper = naive([y - 1.5 for y in variances(halves)], 6.0, head_start * 6.0, hold)
    lower = naive([0.625 - y for y in variances(halves)], 2.0, head_start * 2.0, hold)
    for number, half in enumerate(halves):
        signals = cusum.step(subgroup(-half, half, number=number + 1))
        rows = cusum.rows("it", signals)
        assert [(row.statistic, row.value, bool(row.rules)) for row in rows] == [
            ("upper_sum", *upper[number]),
            ("lower_sum", *lower[number]),
        ]
        expected = ["cusum-upper"] * upper[number][1] + ["cusum-lower"] * lower[number][1]
        assert rules(signals) == expected
        assert all(signal.direction is None for signal in signals)


@given(pairs, st.sampled_from(["up", "down"]))
def test_one_direction_is_half_of_both(halves: list[float], direction: Side) -> None:
    k, h = (1.5, 6.0) if direction == "up" else (0.625, 2.0)
    both, one = fresh(BOTH), fresh(CusumPlan("variance", k, h, 0.5, direction=direction, size=2))
    name = "cusum-upper" if direction == "up" else "cusum-lower"
    for half in halves:
        met = both.step(subgroup(-half, half))
        assert one.step(subgroup(-half, half)) == tuple(s for s in met if s.rule == name)


@given(pairs, st.integers(0, 40))
def test_what_is_remembered_is_all_there_is(halves: list[float], at: int) -> None:
    whole, first, second = fresh(BOTH), fresh(BOTH), fresh(BOTH)
    taken = [subgroup(-half, half, number=i + 1) for i, half in enumerate(halves)]
    expected = [whole.step(each) for each in taken]
    found = [first.step(each) for each in taken[:at]]
    second.restore(json.loads(json.dumps(first.state())))
    assert found + [second.step(each) for each in taken[at:]] == expected


def test_a_larger_subgroup_counts_for_more() -> None:
    """By its degrees of freedom in those of the planned size, as the likelihood ratio has it."""
    cusum = fresh(CusumPlan("variance", 1.5, 60.0, direction="up", size=3))
    cusum.step(subgroup(-2.0, 2.0))  # variance 8, one degree of two
    assert cusum.rows("it", ())[0].value == (8 - 1.5) / 2
    cusum.step(subgroup(-2.0, -2.0, 0.0, 2.0, 2.0))  # variance 4, four degrees of two
    assert cusum.rows("it", ())[0].value == (8 - 1.5) / 2 + (4 - 1.5) * 2


def test_between_subgroup_variation_is_no_matter() -> None:
    plain, between = fresh(BOTH), fresh(BOTH, sigma_between=5.0)
    for cusum in (plain, between):
        cusum.step(subgroup(-3.0, 1.0))
    assert plain.rows("it", ()) == between.rows("it", ())


def test_sums_and_limit_are_shown_in_the_unit_squared() -> None:
    cusum = fresh(CusumPlan("variance", 1.5, 6.0, direction="up", size=2), mean=100.0, sigma=3.0)
    (signal,) = cusum.step(subgroup(94.0, 106.0))  # variance 72, eight times the usual
    assert (signal.statistic, signal.value, signal.lower) == ("upper_sum", 6.5 * 9, None)
    assert signal.upper == 6.0 * 9
    assert signal.ratio == pytest.approx(math.sqrt(8))


def test_a_single_reading_is_blank() -> None:
    cusum = fresh(BOTH)
    assert cusum.step(subgroup(50.0)) == ()
    assert cusum.rows("it", ()) == ()


def test_restarting_forgets_and_shows_nothing() -> None:
    cusum = fresh(BOTH)
    before = cusum.state()
    cusum.step(subgroup(-2.0, 2.0))
    cusum.restart()
    assert cusum.state() == before
    assert cusum.rows("it", ()) == ()


def signalled(*halves: float) -> list[Signal]:
    cusum = fresh(CusumPlan("variance", 1.5, 6.0, direction="up", size=2))
    found: list[Signal] = []
    for number, half in enumerate(halves):
        found += cusum.step(subgroup(-half, half, number=number + 1))
    return found


def test_it_tells_since_when_and_how_much() -> None:
    """From the last zero: of variance 8, after one that was wide and one that was not."""
    (signal,) = signalled(1.0, 0.0, 2.0)
    assert signal.onset == START + 3 * SECOND
    assert (signal.span, signal.ratio) == (1, pytest.approx(math.sqrt(8)))


def test_a_spread_that_lasts_keeps_its_onset_but_not_its_span() -> None:
    """So that a return takes twice as long as a signal took, however long the spread was wide."""
    found = signalled(0.0, 1.5, 1.5, 1.5, 1.5, 1.5)  # variance 4.5: three more than k each
    assert [signal.span for signal in found] == [3]
    found = signalled(0.0, *[2.0] * 6)  # variance 8: a signal at each
    assert [(signal.span, signal.onset) for signal in found] == [(1, START + 2 * SECOND)] * 6


def test_equal_readings_are_no_spread_at_all() -> None:
    cusum = fresh(CusumPlan("variance", 0.625, 1.0, direction="down", size=2))
    assert cusum.step(subgroup(7.0, 7.0)) == ()
    (signal,) = cusum.step(subgroup(7.0, 7.0))
    assert (signal.rule, signal.ratio, signal.span) == ("cusum-lower", 0.0, 2)


@given(st.lists(st.floats(-1e100, 1e100), min_size=1, max_size=20), st.booleans())
def test_absurd_values_leave_the_sums_numbers(values: list[float], hold: bool) -> None:
    cusum = fresh(CusumPlan("variance", 1.5, 6.0, hold=hold, direction="up"), sigma=1e-100)
    for value in values:
        signals = cusum.step(subgroup(value, -value))
        assert all(math.isfinite(row.value) for row in cusum.rows("it", signals))
        assert all(math.isfinite(signal.ratio or 0.0) for signal in signals)


@pytest.mark.parametrize("ratio", [1.5, 2.0])
def test_the_ratio_it_tells_is_about_right(ratio: float) -> None:
    """At the first signal after a change, simulated; the medians, as the few quick signals that
    chance brought about tell of more."""
    rng = np.random.default_rng(5)
    told, late = [], []
    for _ in range(200):
        cusum = fresh(CusumPlan("variance", 1.46, 10.0, direction="up", size=5))
        change = 30
        for number in range(1, 10_000):
            scale = ratio if number >= change else 1.0
            signals = cusum.step(subgroup(*(scale * rng.standard_normal(5)), number=number))
            if signals and number >= change:
                told.append(signals[0].ratio)
                late.append((signals[0].onset or 0) - START - change * SECOND)
                break
    assert np.median(told) == pytest.approx(ratio, rel=0.25)
    assert abs(np.median(late)) <= 3 * SECOND
