"""Subgroups of varying size: every limit and every rule, against arithmetic of its own.

Constants come from densities integrated here on a grid, rules from looking back over all points.
"""

from __future__ import annotations

import math
import statistics
from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import cache
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import START, characteristic, engine, events, fold, message, points, shewhart
from scipy.integrate import simpson
from scipy.special import gammaln
from scipy.stats import norm

from monitor.entries import Entry, Tick
from monitor.outputs import Row
from monitor.plan import ByWindow, Chart, CusumPlan, EwmaPlan, RulePlan, Scheme
from monitor.times import SECOND

MEAN, SIGMA, BETWEEN = 10.0, 2.0, 0.5
WINDOW = 10


def entries_of(sizes: list[list[float]]) -> Iterator[Entry]:
    """Each list's values in a window of its own, the last closed by a tick."""
    start = START - START % (WINDOW * SECOND)
    number = 0
    for place, values in enumerate(sizes):
        for index, value in enumerate(values):
            time = start + (place * WINDOW + index) * SECOND
            document = {"v": value, "t": time / SECOND, "n": number}
            yield replace(message(document), time=time)
            number += 1
    yield Tick(start + 1_000_000 * SECOND)


def rows_of(scheme: Scheme, sizes: list[list[float]]) -> list[tuple[Row, ...]]:
    plan = characteristic(scheme, mean=MEAN, sigma=SIGMA, sigma_between=BETWEEN)
    watching = engine(replace(plan, subgroup=ByWindow(WINDOW * SECOND)))
    made = points(fold(watching, entries_of(sizes)))
    assert [p.subgroup.values for p in made] == [tuple(values) for values in sizes]
    return [p.rows for p in made]


subgroups = st.lists(
    st.lists(
        st.floats(-6, 6, width=16).map(lambda d: MEAN + d) | st.sampled_from([MEAN, MEAN + 1.5]),
        min_size=1,
        max_size=8,
    ),
    min_size=1,
    max_size=25,
)


# Constants of the range, the standard deviation and the median of n standard normal values

GRID = np.linspace(-9, 9, 721)
STEP = float(GRID[1] - GRID[0])


@cache
def range_constants(n: int) -> tuple[float, float]:
    """Mean and standard deviation, from the density of the range."""
    widths = np.linspace(0, 13, 1_301)
    low = GRID[:, None]
    inside = norm.cdf(low + widths) - norm.cdf(low)
    density = n * (n - 1) * norm.pdf(low) * norm.pdf(low + widths) * inside ** (n - 2)
    weights = density.sum(axis=0) * STEP
    mean, square = (simpson(weights * widths**power, x=widths) for power in (1, 2))
    return float(mean), math.sqrt(float(square) - float(mean) ** 2)


@cache
def sd_constants(n: int) -> tuple[float, float]:
    c4 = math.sqrt(2 / (n - 1)) * math.exp(gammaln(n / 2) - gammaln((n - 1) / 2))
    return c4, math.sqrt(1 - c4**2)


@cache
def median_error(n: int) -> float:
    """Standard error, from the density of the middle value, or of the middle two."""
    if n % 2:
        side = (n - 1) // 2
        ways = math.factorial(n) / math.factorial(side) ** 2
        density = ways * (norm.cdf(GRID) * norm.sf(GRID)) ** side * norm.pdf(GRID)
        return math.sqrt(float((density * GRID**2).sum() * STEP))
    side = n // 2 - 1
    ways = math.factorial(n) / math.factorial(side) ** 2
    low, gap = GRID[:, None], np.linspace(0, 12, 2_401)[None, :]
    density = ways * (norm.cdf(low) * norm.sf(low + gap)) ** side
    density = density * norm.pdf(low) * norm.pdf(low + gap) * (low + gap / 2) ** 2
    return math.sqrt(float(simpson(density, x=gap[0], axis=1).sum() * STEP))


def mean_error(n: int) -> float:
    return math.sqrt(BETWEEN**2 + SIGMA**2 / n)


def median_limit_error(n: int) -> float:
    return math.sqrt(BETWEEN**2 + (SIGMA * median_error(n)) ** 2)


Statistic = Callable[[list[float]], float]
LOCATION: dict[Chart, tuple[Statistic, Callable[[int], float]]] = {
    "mean": (statistics.fmean, mean_error),
    "median": (statistics.median, median_limit_error),
}


# Limits


@settings(max_examples=50, deadline=None)
@pytest.mark.parametrize("chart", ["mean", "median"])
@given(subgroups)
def test_limits_of_a_centre_move_with_the_size(chart: Chart, sizes: list[list[float]]) -> None:
    statistic, error = LOCATION[chart]
    for values, (row,) in zip(sizes, rows_of(shewhart(chart=chart, width=2.5), sizes), strict=True):
        reach = 2.5 * error(len(values))
        assert (row.chart, row.statistic, row.centre) == (chart, chart, MEAN)
        assert row.value == pytest.approx(statistic(values), abs=1e-9)
        assert (row.lower, row.upper) == pytest.approx((MEAN - reach, MEAN + reach), rel=1e-6)


@settings(max_examples=50, deadline=None)
@pytest.mark.parametrize("chart", ["range", "sd"])
@given(subgroups)
def test_limits_of_a_spread_move_with_the_size(chart: Chart, sizes: list[list[float]]) -> None:
    constants = range_constants if chart == "range" else sd_constants
    for values, rows in zip(sizes, rows_of(shewhart(chart=chart, width=2.0), sizes), strict=True):
        if len(values) == 1:  # one reading has no spread: the point is blank
            assert rows == ()
            continue
        (row,) = rows
        spread = max(values) - min(values) if chart == "range" else statistics.stdev(values)
        centre, error = (SIGMA * constant for constant in constants(len(values)))
        lower, upper = max(0.0, centre - 2.0 * error), centre + 2.0 * error
        assert row.value == pytest.approx(spread, abs=1e-9)
        assert (row.lower, row.centre, row.upper) == pytest.approx(
            (lower, centre, upper), rel=1e-6, abs=1e-9
        )
        beyond = ["outside-upper"] * (spread > upper) + ["outside-lower"] * (spread < lower)
        assert list(row.rules) == beyond


@settings(max_examples=50, deadline=None)
@given(subgroups, st.sampled_from([None, 1.5]), st.booleans())
def test_a_cusum_adds_each_point_in_its_own_standard_errors(
    sizes: list[list[float]], clip: float | None, hold: bool
) -> None:
    k, h, start = 0.5, 3.0, 1.5
    upper = lower = start
    plan = CusumPlan("mean", k, h, 0.5, clip=clip, hold=hold)
    for values, (above, below) in zip(sizes, rows_of(plan, sizes), strict=True):
        error = mean_error(len(values))
        z = (statistics.fmean(values) - MEAN) / error
        if clip is not None:
            z = max(-clip, min(clip, z))
        upper, lower = max(0.0, upper + z - k), max(0.0, lower - z - k)
        assert (above.statistic, below.statistic) == ("upper_sum", "lower_sum")
        assert (above.value, below.value) == pytest.approx((upper * error, lower * error), abs=1e-9)
        assert above.upper == below.upper == pytest.approx(h * error)
        assert (above.rules, below.rules) == (
            ("cusum-upper",) * (upper > h),
            ("cusum-lower",) * (lower > h),
        )
        if not hold:
            upper = start if upper > h else upper
            lower = start if lower > h else lower


@settings(max_examples=50, deadline=None)
@given(subgroups, st.booleans(), st.booleans())
def test_an_ewmas_limits_follow_the_variance_of_all_its_points(
    sizes: list[list[float]], asymptotic: bool, hold: bool
) -> None:
    lam, width = 0.3, 1.75
    since: list[list[float]] = []
    plan = EwmaPlan("mean", lam, width, asymptotic, hold=hold)
    for values, (row,) in zip(sizes, rows_of(plan, sizes), strict=True):
        since.append(values)
        # The weight of each point in the average, newest first, and what its error adds.
        weights = [lam * (1 - lam) ** age for age in range(len(since))][::-1]
        average = MEAN + sum(
            w * (statistics.fmean(v) - MEAN) for w, v in zip(weights, since, strict=True)
        )
        variance = sum((w * mean_error(len(v))) ** 2 for w, v in zip(weights, since, strict=True))
        if asymptotic:
            variance = mean_error(len(values)) ** 2 * lam / (2 - lam)
        reach = width * math.sqrt(variance)
        assert row.value == pytest.approx(average)
        assert (row.lower, row.upper) == pytest.approx((MEAN - reach, MEAN + reach))
        if abs(abs(average - MEAN) - reach) < 1e-9:
            return  # too close to tell which way rounding fell
        met = ["ewma-upper"] * (average > MEAN + reach) + ["ewma-lower"] * (average < MEAN - reach)
        assert list(row.rules) == met
        if met and not hold:
            since = []


# Rules


def pattern(points: int, length: int, met: Callable[[int, int], str | None]) -> list[str | None]:
    """``met(start, end)`` at each point that ends ``length`` points, none of an earlier pattern."""
    found: list[str | None] = []
    used = 0
    for end in range(1, points + 1):
        start = end - length
        name = met(start, end) if start >= used else None
        used = end if name else used
        found.append(name)
    return found


def expected_rules(plan: RulePlan, values: list[float], errors: list[float]) -> list[str | None]:
    """The rule at every point, from all points at once."""
    z = [(value - MEAN) / error for value, error in zip(values, errors, strict=True)]
    sides = [(value > MEAN) - (value < MEAN) for value in values]
    beyond = [side if abs(x) > plan.width else 0 for x, side in zip(z, sides, strict=True)]
    ends = {1: "-upper", -1: "-lower"}

    def run(start: int, end: int) -> str | None:
        side = sides[start]
        return f"run{ends[side]}" if side and set(sides[start:end]) == {side} else None

    def trend(start: int, end: int) -> str | None:
        steps = {(b > a) - (b < a) for a, b in pairwise(values[start:end])}
        return "trend-up" if steps == {1} else "trend-down" if steps == {-1} else None

    def alternation(start: int, end: int) -> str | None:
        steps = [(b > a) - (b < a) for a, b in pairwise(z[start:end])]
        turns = all(steps) and all(a == -b for a, b in pairwise(steps))
        return "alternation" if turns else None

    def stratification(start: int, end: int) -> str | None:
        return "stratification" if all(abs(x) < plan.width for x in z[start:end]) else None

    def mixture(start: int, end: int) -> str | None:
        return "mixture" if all(beyond[start:end]) else None

    if plan.rule == "outside":
        return [f"outside{ends[side]}" if side else None for side in beyond]
    if plan.rule == "zone":
        return [
            f"zone{ends[side]}"
            if side and beyond[max(0, end - plan.of + 1) : end + 1].count(side) >= plan.count
            else None
            for end, side in enumerate(beyond)
        ]
    met = {
        "run": run,
        "trend": trend,
        "alternation": alternation,
        "stratification": stratification,
        "mixture": mixture,
    }[plan.rule]
    return pattern(len(values), plan.length, met)


@settings(max_examples=60, deadline=None)
@pytest.mark.parametrize("chart", ["mean", "median"])
@pytest.mark.parametrize(
    "plan",
    [
        RulePlan("outside", width=1.1),
        RulePlan("zone", count=2, of=3, width=0.7),
        RulePlan("run", length=3),
        RulePlan("trend", length=3),
        RulePlan("alternation", length=3),
        RulePlan("stratification", length=2, width=1.1),
        RulePlan("mixture", length=2, width=0.6),
    ],
    ids=lambda plan: plan.rule,
)
@given(subgroups)
def test_rules_hold_each_point_against_its_own_limits(
    plan: RulePlan, chart: Chart, sizes: list[list[float]]
) -> None:
    statistic, error = LOCATION[chart]
    values = [statistic(each) for each in sizes]
    errors = [error(len(each)) for each in sizes]
    z = [abs(value - MEAN) / e for value, e in zip(values, errors, strict=True)]
    if any(abs(x - plan.width) < 1e-6 for x in z):
        return  # too close to a limit to tell which way rounding fell
    met = [row.rules for (row,) in rows_of(shewhart(plan, chart=chart), sizes)]
    assert met == [() if name is None else (name,) for name in expected_rules(plan, values, errors)]


def test_a_median_alternates_in_its_own_standard_errors() -> None:
    sizes = [[MEAN + 0.95] * 2, [MEAN + 0.9] * 3, [MEAN + 1.2] * 2]
    own, means = (
        [(values[0] - MEAN) / error(len(values)) for values in sizes]
        for error in (median_limit_error, mean_error)
    )
    assert own[0] > own[1] < own[2]
    assert means[0] < means[1] < means[2]  # means of as many readings spread less than medians
    rules = RulePlan("alternation", length=3)
    found = [row.rules for (row,) in rows_of(shewhart(rules, chart="median"), sizes)]
    assert found[-1] == ("alternation",)


# What people are told


def test_an_alert_shows_the_limits_of_its_own_point() -> None:
    sizes = [[MEAN] * 4, [MEAN + 3.5], [MEAN + 3.5] * 4]
    plan = characteristic(
        shewhart(chart="mean", width=2.0), mean=MEAN, sigma=SIGMA, sigma_between=BETWEEN
    )
    watching = engine(replace(plan, subgroup=ByWindow(WINDOW * SECOND)))
    raised = events(fold(watching, entries_of(sizes)))
    assert [e["event"] for e in raised] == ["raised"]
    statistic = raised[0]["statistic"]
    assert statistic is not None
    assert statistic["upper"] == pytest.approx(MEAN + 2 * mean_error(4))


@pytest.mark.parametrize("last", [1, 8])
def test_a_shift_is_told_in_units_whatever_the_sizes(last: int) -> None:
    sizes = [[MEAN] * n for n in (8, 1, 1, 8) * 5] + [[MEAN + 4.0] * n for n in (1, 8, 1, 1, 8, 1)]
    sizes += [[MEAN + 12.0] * last]  # which signals
    plan = characteristic(
        shewhart(chart="mean", width=5.0), mean=MEAN, sigma=SIGMA, sigma_between=BETWEEN
    )
    watching = engine(replace(plan, subgroup=ByWindow(WINDOW * SECOND)))
    (raised,) = events(fold(watching, entries_of(sizes)))
    ns = [1, 8, 1, 1, 8, 1, last]
    shifts = [4.0] * 6 + [12.0]
    weights = [1 / mean_error(n) ** 2 for n in ns]
    estimate = sum(w * x for w, x in zip(weights, shifts, strict=True)) / sum(weights)
    assert raised["shift"] is not None
    assert raised["shift"]["estimate"] == pytest.approx(estimate)
    assert f"has risen by about {estimate:.2g} g" in raised["text"]


def test_a_shift_that_lasts_is_not_over_since_sizes_vary() -> None:
    still = [[MEAN + 1.5] * n for n in (1, 1, 1, 8) * 10]
    plan = characteristic(
        CusumPlan("mean", 0.5, 4.0), mean=MEAN, sigma=SIGMA, sigma_between=BETWEEN
    )
    watching = engine(replace(plan, subgroup=ByWindow(WINDOW * SECOND)))
    over = [[MEAN] * n for n in (1, 1, 1, 8) * 3]
    caused = events(fold(watching, entries_of(still + over)))
    assert [e["event"] for e in caused] == ["raised", "returned-to-normal"]
    # Towards the baseline by half the shift, in standard errors of each, until past 5.
    towards, needed = 0.0, 0
    while towards <= 5.0:
        towards += max(0.5, 0.75 / mean_error(len(over[needed])))
        needed += 1
    returned = caused[1]["subgroup"]
    assert returned is not None
    assert returned["number"] == len(still) + needed
