"""How a setting's interval is told: by its tail, by its count, or as a bound."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.methods.runlength import ewma
from monitor.plan import CusumPlan, EwmaPlan, RulePlan, ShewhartPlan
from replay.tuning import counting, tails
from replay.tuning.candidates import Candidate
from replay.tuning.intervals import COARSE, CONTRADICTED, bounded, extrapolated
from replay.tuning.judging import Judged
from replay.tuning.result import Extrapolated, Grouping, Observed, Range, Wander
from replay.tuning.tails import PooledPeaks


def test_clipped_values_leave_an_average_near_its_most_no_tail() -> None:
    """Where limits are that near, clipping makes the textbook's interval over 20 times as long;
    where they are not, less than ten times, over more than anybody extrapolates."""
    for width, near in ((4.9, False), (5.9, True), (9.0, True)):
        scheme = EwmaPlan("mean", 0.23, width, clip=3.0)
        assert bounded(scheme) == near
        if width < 8.3:  # the most: 3 √((2 − λ)/λ)
            clipped, free = (
                ewma.run_length(0.23, width, asymptotic=True, clip=c) for c in (3.0, None)
            )
            assert (clipped > 10 * free) == near


@pytest.mark.parametrize(
    "scheme", [EwmaPlan("mean", 0.23, 9.0), CusumPlan("mean", 0.5, 500.0, clip=3.0)]
)
def test_what_has_no_most_is_not_bounded(scheme: CusumPlan | EwmaPlan) -> None:
    assert not bounded(scheme)


def judged(scheme: CusumPlan | EwmaPlan | ShewhartPlan, **more: bool) -> Judged:
    """On 10,000 exponential peaks of scale 1 in 20,000 subgroups."""
    levels = np.random.default_rng(1).exponential(size=10_000)
    peaks = PooledPeaks(levels, np.arange(10_000) * 1_000, 20_000)
    found = tails.fit(peaks, None)
    assert found is not None
    return Judged(Candidate("one", "cusum", scheme, "given"), scheme, found, found, (), **more)


def told(
    one: Judged, alarms: int, interval: Range | None = None
) -> tuple[Extrapolated | None, str, float]:
    """Where a subgroup comes every 2 s: 20,000 in 40,000 s."""
    wander = Wander((), (), None, 1.5, False)
    found = Grouping(1, "single readings", 20_000, 20_000, 0.5, 0.0, wander, 2e6, ())
    interval = interval or counting.between(alarms, 40_000.0)
    return extrapolated(one, found, Observed(alarms, 40_000.0, interval))


def test_few_alarms_leave_it_to_the_tail_and_many_tell_it_themselves() -> None:
    """exp(−6) of 10,000 peaks is 25 passings of 6; a sum that restarts may signal oftener."""
    six = judged(CusumPlan("mean", 0.5, 6.0))
    few, why, _ = told(six, 24)
    assert few is not None
    assert (few.counted, why) == (False, "")
    assert few.seconds == pytest.approx(40_000 / 25, rel=0.25)
    many, why, lowest = told(six, 40)
    assert many is not None
    assert (many.counted, many.seconds, why) == (True, 1_000.0, "")
    assert many.interval == counting.between(40, 40_000.0)
    assert lowest == many.interval.low
    assert many.factor >= many.interval.high / 1_000  # type: ignore[operator]


def test_far_more_alarms_than_peaks_are_no_false_alarms() -> None:
    assert told(judged(CusumPlan("mean", 0.5, 6.0)), 400)[:2] == (None, CONTRADICTED)


def test_coarse_points_have_no_tail_but_a_count() -> None:
    points = judged(ShewhartPlan("individual", 6.0, (RulePlan("outside", 6.0),)), coarse=True)
    assert told(points, 24)[:2] == (None, COARSE)
    many, _, _ = told(points, 40)
    assert many is not None
    assert many.counted


def test_a_bound_is_told_where_clipped_values_hardly_reach() -> None:
    near, why, lowest = told(judged(EwmaPlan("mean", 0.23, 8.0, clip=3.0)), 2)
    assert near is not None
    assert (near.interval, why) == (Range(lowest, None), "")
    assert lowest > 0
