"""Charts of the standard deviation and of the median, from the message to the sentence."""

from __future__ import annotations

import math
import random
import statistics
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import (
    characteristic,
    engine,
    events,
    fold,
    fresh,
    points,
    readings,
    rules,
    shewhart,
    steps,
    subgroup,
)
from scipy.stats import binom, chi2, norm

from monitor.messages import AlertEvent
from monitor.outputs import Row
from monitor.plan import ByCount, Chart, RulePlan, Side

# A4 of the median chart and B3, B4 of the s chart, as handbooks print them (from memory; common
# practice). For the median, A4·R̄ = 3·SE·R̄/d2.
MEDIAN_A4_D2 = {2: 1.880 * 1.128, 3: 1.187 * 1.693, 5: 0.691 * 2.326, 7: 0.509 * 2.704}
B3_B4 = {2: (0.0, 3.267), 5: (0.0, 2.089), 6: (0.030, 1.970), 10: (0.284, 1.716)}
C4 = {2: 0.7979, 5: 0.9400, 6: 0.9515, 10: 0.9727}


def row_of(chart: Chart, *values: float, **baseline: float) -> Row:
    judge = fresh(shewhart(chart=chart), **baseline)
    (row,) = judge.rows("it", judge.step(subgroup(*values)))
    return row


@pytest.mark.parametrize("size", B3_B4)
def test_limits_of_a_standard_deviation(size: int) -> None:
    values = [float(n) for n in range(size)]
    row = row_of("sd", *values, mean=3.0, sigma=2.0, sigma_between=9.0)  # of which it knows nothing
    assert (row.chart, row.statistic) == ("sd", "sd")
    assert row.value == pytest.approx(statistics.stdev(values))
    b3, b4 = B3_B4[size]
    assert row.centre == pytest.approx(2.0 * C4[size], rel=1e-4)
    assert row.lower == pytest.approx(2.0 * C4[size] * b3, abs=3e-3)
    assert row.upper == pytest.approx(2.0 * C4[size] * b4, abs=3e-3)


@pytest.mark.parametrize("size", MEDIAN_A4_D2)
def test_limits_of_a_median(size: int) -> None:
    values = [float(n * n) for n in range(size)]
    row = row_of("median", *values, mean=3.0, sigma=2.0)
    assert (row.chart, row.statistic) == ("median", "median")
    assert row.value == statistics.median(values)
    reach = 2.0 * MEDIAN_A4_D2[size]
    assert row.upper == pytest.approx(3.0 + reach, rel=1e-3)
    assert row.lower == pytest.approx(3.0 - reach, abs=4e-3)


def test_a_median_of_two_varies_as_their_mean_and_one_of_many_as_it_does_in_the_long_run() -> None:
    for size, error in ((1, 1.0), (2, math.sqrt(1 / 2)), (999, math.sqrt(math.pi / 2 / 999))):
        row = row_of("median", *[0.0] * size)
        assert row.upper == pytest.approx(3.0 * error, rel=2e-3)


def test_what_varies_between_subgroups_widens_a_medians_limits() -> None:
    within = row_of("median", *[0.0] * 5).upper
    row = row_of("median", *[0.0] * 5, sigma_between=2.0)
    assert within is not None
    assert row.upper == pytest.approx(math.hypot(within, 3 * 2.0))


@given(st.lists(st.floats(-5, 5, width=16), min_size=2, max_size=9))
def test_the_values_are_those_of_the_standard_library(values: list[float]) -> None:
    assert row_of("sd", *values).value == pytest.approx(statistics.stdev(values), abs=1e-9)
    assert row_of("median", *values).value == statistics.median(values)


def test_one_wild_reading_moves_no_median() -> None:
    chart = fresh(shewhart(chart="median"))
    assert chart.step(subgroup(0.0, 0.1, -0.1, 0.2, 1e6)) == ()
    assert rules(chart.step(subgroup(3.0, 3.1, 2.9, 3.2, -1e6))) == ["outside-upper"]


def test_a_single_reading_has_no_standard_deviation_to_plot() -> None:
    chart = fresh(shewhart(chart="sd"))
    assert chart.step(subgroup(99.0)) == ()
    assert chart.rows("it", ()) == ()
    assert rules(chart.step(subgroup(0.0, 9.0))) == ["outside-upper"]
    # And the value of the subgroup before is not shown for it.
    chart.step(subgroup(99.0))
    assert chart.rows("it", ()) == ()


@pytest.mark.parametrize(("direction", "met"), [("both", 2), ("up", 1), ("down", 1)])
def test_a_standard_deviation_may_be_watched_on_one_side(direction: Side, met: int) -> None:
    chart = fresh(shewhart(chart="sd", direction=direction))
    even = [0.0, 1e-6] * 8
    found = [*chart.step(subgroup(*even)), *chart.step(subgroup(*[0.0, 9.0] * 8))]
    assert len(found) == met


# How likely a subgroup of five is beyond three standard errors: its variance is χ², and its median
# lies beyond x where three or more of the five do.
BEYOND: dict[Chart, float] = {
    "sd": float(chi2.sf(4 * (0.9400 + 3 * math.sqrt(1 - 0.9400**2)) ** 2, 4)),
    "median": 2 * float(binom.sf(2, 5, norm.sf(3 * 0.5356))),
}


@pytest.mark.parametrize("kind", BEYOND)
def test_in_control_they_signal_as_rarely_as_they_should(kind: Chart) -> None:
    chance = random.Random(3)
    chart = fresh(shewhart(chart=kind))
    count = 60_000
    signals = sum(
        len(chart.step(subgroup(*[chance.gauss(0, 1) for _ in range(5)]))) for _ in range(count)
    )
    expected = count * BEYOND[kind]
    assert abs(signals - expected) < 4 * math.sqrt(expected)


def test_every_rule_works_on_medians() -> None:
    chart = fresh(shewhart(RulePlan("run", length=3), RulePlan("trend", length=3), chart="median"))
    assert [rules(each) for each in steps(chart, [0.1, 0.2, 0.3])] == [
        [],
        [],
        ["run-upper", "trend-up"],
    ]


# As people see it


def alerts_of(chart: Chart, *fives: list[float], **changes: float) -> list[AlertEvent]:
    plan = characteristic(shewhart(chart=chart), mean=340.0, sigma=2.0, **changes)  # type: ignore[arg-type]
    watching = engine(replace(plan, subgroup=ByCount(5)))
    return events(fold(watching, readings([value for five in fives for value in five])))


WIDE = [330.0, 350.0, 330.0, 350.0, 340.0]
USUAL = [338.0, 342.0, 339.0, 341.0, 340.0]
HIGH = [345.0, 343.0, 344.0, 346.0, 344.0]


def test_an_alert_of_a_standard_deviation_has_no_direction() -> None:
    (raised,) = alerts_of("sd", USUAL, WIDE)
    assert (raised["rule"], raised["direction"], raised["chart"]) == ("outside-upper", None, "sd")
    assert (raised["priority"], raised["shift"]) == ("low", None)
    statistic = raised["statistic"]
    assert statistic is not None
    assert (statistic["name"], statistic["lower"]) == ("sd", 0.0)
    assert statistic["value"] == pytest.approx(10.0)
    assert statistic["upper"] == pytest.approx(2.0 * 0.9400 * 2.089, rel=1e-3)
    assert raised["text"] == (
        "Net weight varies more than usual (standard deviation 10.00 g, limit 3.93 g)."
    )


def test_it_returns_when_twice_the_rules_span_was_usual() -> None:
    caused = alerts_of("sd", USUAL, WIDE, USUAL, USUAL)
    assert [(e["event"], e["direction"]) for e in caused] == [
        ("raised", None),
        ("returned-to-normal", None),
    ]
    assert caused[1]["text"] == "Net weight has returned to normal: it varies as usual."
    assert caused[1]["subgroup"] is not None
    assert caused[1]["subgroup"]["number"] == 4


def test_spread_and_centre_are_two_alerts() -> None:
    plan = characteristic(shewhart(chart="sd"), shewhart(chart="median"), mean=340.0, sigma=2.0)
    watching = engine(replace(plan, subgroup=ByCount(5)))
    wide_and_high = [value + 9.0 for value in WIDE]
    caused = events(fold(watching, readings(wide_and_high)))
    assert [(e["event"], e["chart"], e["direction"]) for e in caused] == [
        ("raised", "sd", None),
        ("raised", "median", "up"),
    ]


def test_too_even_is_an_alert_too() -> None:
    ten = [340.0, 340.1] * 5
    plan = characteristic(shewhart(chart="sd"), mean=340.0, sigma=2.0)
    watching = engine(replace(plan, subgroup=ByCount(10)))
    (raised,) = events(fold(watching, readings(ten)))
    assert (raised["rule"], raised["direction"]) == ("outside-lower", None)
    assert raised["text"].startswith("Net weight varies less than usual (standard deviation 0.0")


def test_an_alert_of_a_median_says_which_way_and_how_far() -> None:
    (raised,) = alerts_of("median", USUAL, HIGH)
    assert (raised["rule"], raised["direction"], raised["chart"]) == (
        "outside-upper",
        "up",
        "median",
    )
    assert raised["priority"] == "medium"
    assert raised["text"] == (
        "Net weight has risen by about 4.4 g since about 06:41:17 UTC "
        "(median 344.00 g, limit 343.21 g)."
    )


def test_points_carry_both() -> None:
    plan = characteristic(shewhart(chart="sd"), shewhart(chart="median"), mean=340.0, sigma=2.0)
    watching = engine(replace(plan, subgroup=ByCount(5)))
    (made,) = points(fold(watching, readings(USUAL)))
    assert [(r.detector, r.chart, r.statistic, r.value) for r in made.rows] == [
        ("shewhart", "sd", "sd", pytest.approx(statistics.stdev(USUAL))),
        ("shewhart-2", "median", "median", 340.0),
    ]
