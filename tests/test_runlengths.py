"""Run lengths of plans: each plan reaches its own published method, and solved plans hold."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.configuration.presets import preset
from monitor.methods.runlength import cusum, ewma, shewhart, spread
from monitor.plan import CusumPlan, EwmaPlan, RulePlan, ShewhartPlan, Side
from monitor.runlengths import Kind, RunLength, floor, run_length, solve


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
