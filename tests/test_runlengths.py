"""Run lengths of plans: each plan reaches its own published method, and solved plans hold."""

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.configuration.presets import preset
from monitor.detectors import detector
from monitor.methods.runlength import cusum, ewma, shewhart, spread, variance_cusum
from monitor.plan import (
    BaselinePlan,
    Chart,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    RulePlan,
    Scheme,
    ShewhartPlan,
    Side,
)
from monitor.runlengths import (
    Kind,
    RunLength,
    floor,
    quantile,
    run_length,
    solve,
    solve_spread_chart,
    solve_variance,
)
from monitor.subgroups import Subgroup


def test_each_plan_reaches_its_method() -> None:
    plan = CusumPlan("mean", 0.5, 4, head_start=0.5, clip=3.0, direction="down")
    expected = cusum.run_length(0.5, 4, -1, direction="down", head_start=0.5, clip=3.0)
    assert run_length(plan, -1) == RunLength(expected)
    assert run_length(EwmaPlan("mean", 0.1, 2.8, asymptotic=True, direction="up"), 1) == RunLength(
        ewma.run_length(0.1, 2.8, 1, direction="up", asymptotic=True)
    )
    assert run_length(EwmaPlan("mean", 0.1, 2.8)) == RunLength(ewma.run_length(0.1, 2.8))
    outside = (RulePlan("outside", width=2.5),)
    assert run_length(ShewhartPlan("mean", 3, outside), 1).subgroups == pytest.approx(
        shewhart.run_length(2.5, 1), rel=1e-9
    )
    assert run_length(ShewhartPlan("range", 2.5, outside), size=5) == RunLength(
        spread.run_length("range", 5, 2.5)
    )
    assert run_length(ShewhartPlan("moving_range", 2.5, outside)) == RunLength(
        spread.moving_range_run_length(2.5)
    )


def test_charts_of_medians_and_standard_deviations() -> None:
    outside = (RulePlan("outside", width=2.5), RulePlan("outside", width=3.0))
    assert run_length(ShewhartPlan("sd", 3, outside, "up"), size=5) == RunLength(
        spread.run_length("sd", 5, 2.5, direction="up")
    )
    assert run_length(ShewhartPlan("median", 3, outside, "up"), 1, size=5) == RunLength(
        shewhart.median_run_length(5, 2.5, 1, direction="up")
    )


@pytest.mark.parametrize("size", [3, 5, 12])
def test_rules_on_medians_see_their_own_distribution(size: int) -> None:
    """A pattern that never comes leaves the outer limit alone, whose run length is exact; and what
    asks for the side only comes as often as on means."""
    rare = (RulePlan("outside", width=3.0), RulePlan("run", length=300))
    assert run_length(ShewhartPlan("median", 3, rare), size=size).subgroups == pytest.approx(
        shewhart.median_run_length(size, 3.0), rel=1e-6
    )
    sides = (RulePlan("run", length=8),)
    assert run_length(ShewhartPlan("median", 3, sides), size=size).subgroups == pytest.approx(255)


def test_what_would_take_too_long_is_refused() -> None:
    """Rather than keep somebody waiting for hours."""
    far = (RulePlan("zone", width=2, count=9, of=900),)
    for plan in (
        EwmaPlan("mean", 1e-6, 3.0),
        CusumPlan("mean", 0, 400),
        ShewhartPlan("mean", 3, far),
    ):
        with pytest.raises(ValueError, match=r"beyond|too small|too much"):
            run_length(plan)


def test_only_what_must_be_simulated_has_an_error() -> None:
    exact = run_length(ShewhartPlan("mean", 3, preset("western-electric-1956", 3)))
    assert exact.standard_error == 0
    assert exact.subgroups == pytest.approx(91.75, abs=0.01)
    simulated = run_length(ShewhartPlan("mean", 3, preset("nelson-1984", 3)))
    assert 0 < simulated.standard_error < 0.01 * simulated.subgroups


@settings(deadline=None, max_examples=30)
@given(
    st.sampled_from(["cusum", "ewma", "shewhart"]),
    st.floats(0.4, 3),
    st.floats(0, 0.3),
    st.floats(2, 9),
    st.sampled_from(["both", "up", "down"]),
)
def test_a_solved_detector_holds_its_interval(
    kind: Kind, catch: float, share: float, log10: float, direction: Side
) -> None:
    ignore, interval = share * catch, 10**log10
    plan = solve(kind, catch, interval, ignore=ignore, direction=direction)
    off = -ignore if direction == "down" else ignore
    assert run_length(plan, off).subgroups == pytest.approx(interval, rel=1e-4)


@pytest.mark.parametrize("direction", ["both", "up", "down"])
@pytest.mark.parametrize(("catch", "ignore"), [(1.0, 0.0), (1.5, 0.4)])
def test_a_solved_cusum_stands_on_the_floor(catch: float, ignore: float, direction: Side) -> None:
    plan = solve("cusum", catch, 1e5, ignore=ignore, direction=direction)
    shift = -catch if direction == "down" else catch
    found = floor(shift, 1e5, ignore=ignore, direction=direction)
    assert found is not None
    assert run_length(plan, shift).subgroups == pytest.approx(found, rel=0.01)


def test_where_there_is_no_floor() -> None:
    assert floor(0.0, 1000.0) == 1000.0
    assert floor(0.2, 1000.0, ignore=0.5) is None
    assert floor(-1.0, 1000.0, direction="up") is None
    assert floor(1.0, math.inf) is None
    assert floor(1e-4, 1e12) is None
    assert floor(-1.0, 1000.0) == floor(1.0, 1000.0)


@pytest.mark.parametrize("direction", ["both", "up", "down"])
@pytest.mark.parametrize("head_start", [0.0, 0.5])
@pytest.mark.parametrize(
    ("ratio", "interval", "size"), [(1.5, 1e6, 5), (2.0, 2e3, 2), (1.2, 1e4, 9)]
)
def test_a_solved_variance_cusum_holds_its_interval(
    direction: Side, head_start: float, ratio: float, interval: float, size: int
) -> None:
    plan = solve_variance(ratio, interval, size=size, direction=direction, head_start=head_start)
    assert run_length(plan, size=size).subgroups == pytest.approx(interval, rel=1e-4)
    assert (plan.chart, plan.size, plan.direction) == ("variance", size, direction)
    if direction != "up":
        down = solve_variance(1 / ratio, interval, size=size, direction=direction)
        assert down == replace(plan, head_start=0.0) or head_start


def test_a_ratio_that_is_no_change_is_refused() -> None:
    for ratio, direction in ((1.0, "both"), (0.0, "down"), (0.8, "up")):
        with pytest.raises(ValueError, match="no spread"):
            solve_variance(ratio, 1000, size=5, direction=direction)  # type: ignore[arg-type]


def test_a_subgroup_of_another_size_weighs_as_it_should() -> None:
    """Sums grow in proportion to the weight, so that h is as if divided by it."""
    plan = CusumPlan("variance", 1.46, 8.0, direction="up", size=5)
    expected = variance_cusum.run_length(1.46, 4.0, 1.3, nu=8)
    assert run_length(plan, size=9, ratio=1.3).subgroups == pytest.approx(expected)


@pytest.mark.parametrize("direction", ["both", "up", "down"])
@pytest.mark.parametrize("chart", ["range", "sd", "variance", "moving_range"])
@pytest.mark.parametrize("interval", [30.0, 1e5, 1e12])
def test_a_solved_chart_of_spread_holds_its_interval(
    direction: Side, chart: Chart, interval: float
) -> None:
    plan = solve_spread_chart(chart, interval, 5, direction)
    assert run_length(plan, size=5).subgroups == pytest.approx(interval, rel=1e-5)
    if direction == "both" and chart != "moving_range":  # either side rings as often
        up = run_length(replace(plan, direction="up"), size=5).subgroups
        assert up == pytest.approx(2 * interval, rel=1e-5)


def simulated_quantiles(scheme: Scheme, shift: float, size: int, ratio: float) -> list[float]:
    """Median and 90 % of 4,000 runs of the real detector."""
    rng = np.random.default_rng(23)
    watched = detector(DetectorPlan("it", "it", scheme, ""), BaselinePlan(0.0, 1.0, 0.0, ""))
    lengths = []
    for _ in range(4_000):
        watched.restart()
        for number in itertools.count(1):
            values = (ratio * rng.standard_normal(size) + shift / math.sqrt(size)).tolist()
            mean = sum(values) / size
            one = Subgroup(number, tuple(values), 0, 0, (None,) * 4, False, size, mean)
            if watched.step(one):
                lengths.append(number)
                break
    return np.quantile(lengths, [0.5, 0.9], method="inverted_cdf").tolist()


@pytest.mark.parametrize(
    ("scheme", "shift", "size", "ratio"),
    [
        (CusumPlan("mean", 0.5, 4), 0.7, 1, 1.0),
        (CusumPlan("mean", 0.5, 4, 0.5, direction="down"), -1, 1, 1.0),
        (EwmaPlan("mean", 0.1, 2.5), 0.8, 1, 1.0),
        (EwmaPlan("mean", 0.2, 2.8, asymptotic=True, direction="down"), -1, 1, 1.0),
        (ShewhartPlan("mean", 3, preset("western-electric-1956", 3)), 1, 1, 1.0),
        (ShewhartPlan("median", 2, (RulePlan("outside", width=2.0),)), 0, 3, 1.0),
        (ShewhartPlan("range", 2, (RulePlan("outside", width=2.0),), exact=True), 0, 4, 1.4),
        (CusumPlan("variance", 1.46, 5, k_lower=0.65, h_lower=4, size=4), 0, 4, 1.5),
        (CusumPlan("variance", 0.65, 2, 0.5, direction="down", size=4), 0, 4, 0.7),
    ],
)
def test_quantiles_against_the_real_detectors(
    scheme: Scheme, shift: float, size: int, ratio: float
) -> None:
    found = [quantile(scheme, shift, p, size=size, ratio=ratio) for p in (0.5, 0.9)]
    assert found == pytest.approx(simulated_quantiles(scheme, shift, size, ratio), rel=0.06, abs=1)


@given(st.floats(0.05, 0.95), st.floats(0, 2))
def test_a_quantile_grows_with_its_probability(probability: float, shift: float) -> None:
    plan = CusumPlan("mean", 0.5, 5)
    assert quantile(plan, shift, probability / 2) <= quantile(plan, shift, probability)


def test_in_control_a_run_length_is_geometric_but_for_its_start() -> None:
    plan = CusumPlan("mean", 0.5, 9)
    average = run_length(plan).subgroups
    assert quantile(plan, 0.0, 0.5) == pytest.approx(average * math.log(2), rel=0.01)
    assert quantile(ShewhartPlan("mean", 3, (RulePlan("outside", width=3.0),))) == 257
