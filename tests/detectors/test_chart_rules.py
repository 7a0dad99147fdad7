"""Every rule of a Shewhart chart, against its definition tried on every window of points.

Points are halves, so that many lie exactly on the centre, on a limit, or level with a neighbour.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import fresh, rules, shewhart, steps, subgroup

from monitor.plan import RulePlan

points = st.lists(st.integers(-7, 7).map(lambda n: n / 2), max_size=60)
near = st.lists(st.sampled_from([-1.0, -0.5, 0.0, 0.5, 1.0]), max_size=60)
lengths = st.integers(2, 6)

Window = list[float]


def signals_of(values: list[float], *planned: RulePlan) -> list[list[str]]:
    return [rules(each) for each in steps(fresh(shewhart(*planned)), values)]


def fresh_windows(
    values: list[float], length: int, met: Callable[[Window], str | None]
) -> list[list[str]]:
    """The rule's name at each point that completes a window sharing no point with the last."""
    found: list[list[str]] = []
    since = 0
    for end in range(1, len(values) + 1):
        window = values[max(end - length, 0) : end]
        name = met(window) if end - since >= length else None
        found.append([] if name is None else [name])
        if name is not None:
            since = end
    return found


@given(points, st.sampled_from([1.0, 2.0, 3.0]))
def test_outside_is_each_point_beyond(values: list[float], width: float) -> None:
    assert signals_of(values, RulePlan("outside", width=width)) == [
        ["outside-upper"] if x > width else ["outside-lower"] if x < -width else [] for x in values
    ]


@given(points, st.integers(1, 5), st.integers(1, 5), st.sampled_from([1.0, 2.0]))
def test_zone_is_enough_of_the_last_points_the_newest_among_them(
    values: list[float], count: int, of: int, width: float
) -> None:
    count = min(count, of)
    expected = []
    for end in range(1, len(values) + 1):
        window = values[max(end - of, 0) : end]
        above, below = (sum(side * x > width for x in window) for side in (1, -1))
        if window[-1] > width and above >= count:
            expected.append(["zone-upper"])
        elif window[-1] < -width and below >= count:
            expected.append(["zone-lower"])
        else:
            expected.append([])
    assert signals_of(values, RulePlan("zone", count=count, of=of, width=width)) == expected


@given(points | near, lengths)
def test_run_is_a_window_on_one_side_of_the_centre(values: list[float], length: int) -> None:
    def met(window: Window) -> str | None:
        if all(x > 0 for x in window):
            return "run-upper"
        return "run-lower" if all(x < 0 for x in window) else None

    assert signals_of(values, RulePlan("run", length=length)) == fresh_windows(values, length, met)


@given(points, lengths)
def test_trend_is_a_window_that_only_rises_or_only_falls(values: list[float], length: int) -> None:
    def met(window: Window) -> str | None:
        if all(a < b for a, b in pairwise(window)):
            return "trend-up"
        return "trend-down" if all(a > b for a, b in pairwise(window)) else None

    rule = RulePlan("trend", length=length)
    assert signals_of(values, rule) == fresh_windows(values, length, met)


@given(points, lengths)
def test_alternation_is_a_window_whose_every_step_turns(values: list[float], length: int) -> None:
    def met(window: Window) -> str | None:
        moves = [b - a for a, b in pairwise(window)]
        turning = all(a * b < 0 for a, b in pairwise(moves)) and all(moves)
        return "alternation" if turning else None

    rule = RulePlan("alternation", length=length)
    assert signals_of(values, rule) == fresh_windows(values, length, met)


@given(near, lengths)
def test_stratification_is_a_window_inside(values: list[float], length: int) -> None:
    def met(window: Window) -> str | None:
        return "stratification" if all(abs(x) < 1 for x in window) else None

    rule = RulePlan("stratification", length=length, width=1.0)
    assert signals_of(values, rule) == fresh_windows(values, length, met)


@given(points, lengths)
def test_mixture_is_a_window_outside_on_either_side(values: list[float], length: int) -> None:
    def met(window: Window) -> str | None:
        return "mixture" if all(abs(x) > 1 for x in window) else None

    rule = RulePlan("mixture", length=length, width=1.0)
    assert signals_of(values, rule) == fresh_windows(values, length, met)


@given(points)
def test_rules_do_not_disturb_each_other(values: list[float]) -> None:
    together = [
        RulePlan("outside", width=3.0),
        RulePlan("zone", count=2, of=3, width=2.0),
        RulePlan("run", length=4),
        RulePlan("trend", length=4),
        RulePlan("alternation", length=5),
        RulePlan("stratification", length=4, width=1.0),
        RulePlan("mixture", length=4, width=1.0),
    ]
    alone = [signals_of(values, rule) for rule in together]
    assert signals_of(values, *together) == [
        [name for met in each for name in met] for each in zip(*alone, strict=True)
    ]


@pytest.mark.parametrize(
    ("rule", "values", "at"),
    [
        # Where each rule signals in a pattern twice as long and longer, points counted from 1.
        (RulePlan("run", length=4), [1.0] * 11, [4, 8]),
        (RulePlan("trend", length=4), [float(n) for n in range(11)], [4, 8]),
        (RulePlan("alternation", length=4), [1.0, -1.0] * 5 + [1.0], [4, 8]),
        (RulePlan("stratification", length=4, width=1.0), [0.0] * 11, [4, 8]),
        (RulePlan("mixture", length=4, width=1.0), [2.0, -2.0] * 5 + [2.0], [4, 8]),
        (RulePlan("zone", count=2, of=3, width=2.0), [2.5] * 5, [2, 3, 4, 5]),
        (RulePlan("outside", width=3.0), [3.5] * 3, [1, 2, 3]),
    ],
)
def test_a_pattern_signals_afresh_and_a_point_each_time(
    rule: RulePlan, values: list[float], at: list[int]
) -> None:
    assert [i for i, met in enumerate(signals_of(values, rule), 1) if met] == at


def test_with_varying_sizes_a_point_is_judged_by_its_own_standard_error() -> None:
    # A mean of 0.8 is 0.8 standard errors of one reading, and 2.4 of nine.
    chart = fresh(shewhart(RulePlan("outside", width=2.0), chart="mean", width=2.0))
    assert chart.step(subgroup(0.8)) == ()
    assert rules(chart.step(subgroup(*[0.8] * 9))) == ["outside-upper"]
    assert chart.step(subgroup(0.8)) == ()


def test_with_varying_sizes_alternation_takes_standardised_values_and_trend_plain_ones() -> None:
    # Means fall steadily; standardised by √n they go up and down.
    chart = fresh(
        shewhart(RulePlan("trend", length=4), RulePlan("alternation", length=4), chart="mean")
    )
    met = [
        rules(chart.step(subgroup(*[mean] * size)))
        for mean, size in [(1.0, 1), (0.9, 4), (0.8, 1), (0.7, 4)]
    ]
    assert met == [[], [], [], ["trend-down", "alternation"]]
