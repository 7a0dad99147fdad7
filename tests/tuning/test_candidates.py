"""Which settings are tried, and with what constants."""

from __future__ import annotations

import math

import numpy as np
import pytest
from plans import characteristic, shewhart

from monitor.methods.runlength import ewma
from monitor.plan import BaselinePlan, ByCount, CusumPlan, EwmaPlan, RulePlan, ShewhartPlan
from replay.readings import StreamReadings
from replay.tuning.array_ewma import recurrence
from replay.tuning.candidates import (
    Request,
    candidates,
    configured,
    ewma_weight,
    limit,
    spreading,
    with_limit,
)
from replay.tuning.grouped import Grouped, group

REQUEST = Request(promise=86_400.0, catch=(1.0, 3.0), ignore=(0.0, 0.5))


def grouped(size: int) -> Grouped:
    values = np.random.default_rng(1).normal(size=1_000)
    readings = StreamReadings((), np.arange(1_000), values, np.empty(0, np.int64))
    one = group(ByCount(size), readings, fit_to=600, prove_from=600, left_out=())
    assert one is not None
    return Grouped(ByCount(size), size, (one,))


def test_worked_out_from_what_people_can_judge() -> None:
    found = {each.name: each.scheme for each in candidates(REQUEST, grouped(5), 0.5, 1e5)}
    assert len(found) == 9
    cusum = found["cusum, catch 1, ignore 0.5, size 5"]
    assert isinstance(cusum, CusumPlan)
    assert (cusum.k, cusum.clip, cusum.chart) == (1.5, 3.0, "mean")  # (2 + 1)/2 standard errors
    large = found["cusum, catch 3, size 5"]
    assert isinstance(large, CusumPlan)
    assert large.clip is not None
    assert large.clip > large.k  # or the sums could never rise
    (single, *_) = candidates(REQUEST, grouped(1), 0.5, 1e5)
    assert single.scheme.chart == "individual"


def test_an_average_clips_no_nearer_than_its_limit_will_lie() -> None:
    """Limits lie as far out as averages spread: by simulation of an autoregression of 0.8."""
    request = Request(1.0, (1.0,), kinds=("ewma",))
    steps = np.random.default_rng(2).normal(size=400_000) * 0.6
    average = recurrence(0.8, 0.2 * recurrence(0.8, steps))
    spread = average.std() / math.sqrt(0.2 / 1.8)
    assert spreading(0.2, 0.8) == pytest.approx(spread, rel=0.02)
    for correlation, least in ((-0.4, 1.0), (0.0, 1.0), (0.8, 2.0)):
        (one,) = candidates(request, grouped(1), 0.6, 1e4, correlation)
        assert isinstance(one.scheme, EwmaPlan)
        clip = 3.0 * spreading(one.scheme.lam, correlation)
        assert one.scheme.clip == pytest.approx(clip, abs=0.051)
        assert clip >= 3.0 * least


@pytest.mark.parametrize("interval", [1e4, 1e6])
@pytest.mark.parametrize("catch", [0.3, 1.5, 3.0])
@pytest.mark.parametrize("share", [0.0, 0.5])
def test_the_weight_loses_little_against_the_best(
    interval: float, catch: float, share: float
) -> None:
    """Run length at the shift, with limits solved for the interval, within 8 % of the best λ's."""

    def late(lam: float) -> float:
        width = ewma.width_for(lam, interval, share * catch, asymptotic=True)
        return ewma.run_length(lam, width, catch, asymptotic=True)

    best = ewma.best_weight(catch, interval, share * catch)
    assert late(ewma_weight(catch, share * catch, interval)) <= 1.08 * late(best)


def test_given_and_configured() -> None:
    request = Request(
        1.0, (1.0,), kinds=(), cusums=((0.5, 5.0),), ewmas=((0.1, 2.8),), shewharts=(3.5,)
    )
    given = candidates(request, grouped(5), 0.5, 1e5)
    assert [each.name for each in given] == [
        "cusum 0.5,5, size 5",
        "ewma 0.1,2.8, size 5",
        "shewhart 3.5, size 5",
    ]
    assert [limit(each.scheme) for each in given] == [5.0, 2.8, 3.5]
    plan = characteristic(
        CusumPlan("mean", 0.5, 5.0),
        shewhart(RulePlan("outside", 4.0), RulePlan("run", length=8), chart="mean"),
        shewhart(RulePlan("outside", 4.0), RulePlan("outside", 3.5), chart="mean"),
        shewhart(chart="range"),
        size=5,
    )
    found, left = configured(plan, ())
    assert [each.name for each in found] == ["as configured: cusum", "as configured: shewhart-2"]
    assert limit(found[1].scheme) == 3.5
    assert left == ["shewhart", "shewhart-3"]


def test_another_limit() -> None:
    both = CusumPlan("variance", 1.5, 4.0, k_lower=0.6, h_lower=2.0)
    assert with_limit(both, 8.0) == CusumPlan("variance", 1.5, 8.0, k_lower=0.6, h_lower=4.0)
    assert with_limit(EwmaPlan("mean", 0.1, 1.0), 2.0) == EwmaPlan("mean", 0.1, 2.0)
    changed = with_limit(shewhart(chart="mean"), 2.0)
    assert isinstance(changed, ShewhartPlan)
    assert changed.rules == (RulePlan("outside", 2.0),)


def test_baseline_of_the_first_part() -> None:
    """Sigma is pooled within subgroups, sigma between is what means vary beyond it."""
    rng = np.random.default_rng(3)
    values = 341.2 + np.repeat(rng.normal(0, 0.8, 4_000), 5) + rng.normal(0, 1.9, 20_000)
    values[12_000:] += 50.0
    readings = StreamReadings((), np.arange(20_000), values, np.empty(0, np.int64))
    found = group(ByCount(5), readings, fit_to=11_999, prove_from=12_000, left_out=[(0, 99)])
    assert found is not None
    assert (found.fit, found.prove) == (2_400, 2_400)
    assert found.left_out.sum() == 20
    assert found.centre == pytest.approx(341.2, abs=0.1)
    assert found.sigma == pytest.approx(1.9, rel=0.03)
    assert found.between == pytest.approx(0.8, rel=0.1)
    assert found.error == pytest.approx(np.sqrt(found.between**2 + found.sigma**2 / 5))
    given = BaselinePlan(340.0, 2.0, 0.0, "")
    against = group(
        ByCount(5), readings, fit_to=11_999, prove_from=12_000, left_out=(), baseline=given
    )
    assert against is not None
    assert (against.centre, against.sigma) == (340.0, 2.0)
