"""Shewhart charts: what is charted, where the limits lie, what a signal says."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import fresh, rules, shewhart, steps, subgroup

from monitor.methods.constants import d2, d3
from monitor.outputs import Row
from monitor.plan import Chart, RulePlan, Side


def row_of(chart: Chart, *values: float, width: float = 3.0, **baseline: float) -> Row:
    judge = fresh(shewhart(chart=chart, width=width), **baseline)
    (row,) = judge.rows("it", judge.step(subgroup(*values)))
    return row


@given(st.integers(1, 12), st.floats(0.1, 9), st.floats(0, 9), st.floats(0.5, 6))
def test_limits_of_a_mean(size: int, sigma: float, between: float, width: float) -> None:
    row = row_of("mean", *[5.0] * size, mean=5.0, sigma=sigma, sigma_between=between, width=width)
    reach = width * math.sqrt(between**2 + sigma**2 / size)
    assert (row.lower, row.centre, row.upper) == pytest.approx((5.0 - reach, 5.0, 5.0 + reach))


@pytest.mark.parametrize("size", [2, 5, 10])
def test_limits_of_a_range_ignore_what_varies_between_subgroups(size: int) -> None:
    row = row_of("range", 1.0, *[4.0] * (size - 1), sigma=2.0, sigma_between=9.0)
    assert row.value == 3.0
    centre, reach = d2(size) * 2.0, 3 * d3(size) * 2.0
    assert (row.lower, row.centre, row.upper) == pytest.approx(
        (max(0.0, centre - reach), centre, centre + reach)
    )


def test_a_moving_range_is_blank_first_and_after_a_break() -> None:
    chart = fresh(shewhart(chart="moving_range"))
    shown = []
    for value, broken in [(1.0, False), (4.0, False), (3.5, True), (1.5, False)]:
        signals = chart.step(subgroup(value, broken=broken))
        shown.append([row.value for row in chart.rows("it", signals)])
    assert shown == [[], [3.0], [], [2.0]]
    row = chart.rows("it", ())[0]
    # Common practice: the limits of a range of two, 3.267·1.128·σ and 0.
    assert (row.lower, row.upper) == (0.0, pytest.approx(3.686, abs=5e-4))


def test_a_moving_range_is_blank_after_a_restart() -> None:
    chart = fresh(shewhart(chart="moving_range"))
    steps(chart, [1.0, 2.0])
    chart.restart()
    assert chart.rows("it", ()) == ()
    assert chart.step(subgroup(99.0)) == ()
    assert rules(chart.step(subgroup(0.0))) == ["outside-upper"]


def test_a_restart_cuts_every_pattern() -> None:
    chart = fresh(shewhart(RulePlan("run", length=4)))
    steps(chart, [1.0, 1.0])
    chart.restart()
    assert [rules(each) for each in steps(chart, [1.0] * 4)] == [[], [], [], ["run-upper"]]


@pytest.mark.parametrize(
    ("direction", "met"),
    [
        ("both", ["outside-upper", "trend-up", "outside-lower", "trend-down"]),
        ("up", ["outside-upper", "trend-up"]),
        ("down", ["outside-lower", "trend-down"]),
    ],
)
def test_direction_leaves_out_the_other_side(direction: Side, met: list[str]) -> None:
    chart = fresh(
        shewhart(RulePlan("outside", width=3.0), RulePlan("trend", length=3), direction=direction)
    )
    found = [
        rule for each in steps(chart, [0.0, 1.0, 4.0, 0.0, -1.0, -4.0]) for rule in rules(each)
    ]
    assert found == met


def test_direction_leaves_patterns_without_a_side() -> None:
    chart = fresh(shewhart(RulePlan("alternation", length=4), direction="up"))
    assert [len(s) for s in steps(chart, [0.0, 1.0, 0.0, 1.0])] == [0, 0, 0, 1]


def test_a_signal_on_a_spread_chart_has_no_direction() -> None:
    chart = fresh(shewhart(chart="range"))
    (signal,) = chart.step(subgroup(0.0, 9.0))
    assert (signal.rule, signal.direction, signal.statistic) == ("outside-upper", None, "range")


def test_a_signal_tells_the_limits_it_was_held_against() -> None:
    chart = fresh(
        shewhart(
            RulePlan("outside", width=4.0),
            RulePlan("zone", count=1, of=1, width=2.0),
            RulePlan("run", length=1),
            RulePlan("mixture", length=1, width=1.0),
        )
    )
    assert [(s.rule, s.lower, s.upper, s.span) for s in chart.step(subgroup(5.0))] == [
        ("outside-upper", -4.0, 4.0, 1),
        ("zone-upper", -2.0, 2.0, 1),
        ("run-upper", -3.0, 3.0, 1),
        ("mixture", -1.0, 1.0, 1),
    ]


def test_rules_of_one_name_signal_once_a_point_as_the_first_declared() -> None:
    chart = fresh(
        shewhart(
            RulePlan("zone", count=2, of=3, width=2.0), RulePlan("zone", count=2, of=5, width=1.0)
        )
    )
    first, second = steps(chart, [2.5, 2.5])
    assert first == ()
    assert [(s.rule, s.needed, s.span) for s in second] == [("zone-upper", 2, 3)]
    assert chart.rows("it", second)[0].rules == ("zone-upper",)


def test_limits_that_rounding_makes_one_are_no_error() -> None:
    # 1e10 ± 3e-7 is 1e10: everything else is outside.
    chart = fresh(
        shewhart(RulePlan("outside", width=3.0), RulePlan("alternation", length=3)), 1e10, 1e-7
    )
    assert [rules(s) for s in steps(chart, [1e10, 1e10 + 1, 1e10])] == [
        [],
        ["outside-upper"],
        ["alternation"],
    ]
