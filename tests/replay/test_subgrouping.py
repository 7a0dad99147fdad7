"""Subgroups over arrays: the same that the engine's gatherers make, reading by reading."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.plan import ByCount, ByWindow, SubgroupPlan
from monitor.subgroups import Subgroup, gatherer
from monitor.times import SECOND
from replay.readings import StreamReadings
from replay.subgrouping import Subgroups, subgroups

PLANS = st.one_of(
    st.builds(
        ByCount,
        st.integers(1, 7),
        st.none() | st.integers(1, 12),
        st.none() | st.integers(1, 40),
    ),
    st.builds(ByWindow, st.integers(1, 30), st.integers(1, 4)),
)
STEPS = st.lists(
    st.tuples(
        st.sampled_from([0, 1, 1, 2, 5, 20]),
        st.floats(-1e3, 1e3).map(lambda x: round(x, 3)),
        st.sampled_from([False] * 9 + [True]),
    ),
    max_size=80,
)


def one_by_one(plan: SubgroupPlan, readings: StreamReadings) -> tuple[list[Subgroup], int]:
    given_up: list[None] = []
    gather = gatherer(plan, lambda: given_up.append(None))
    found = []
    restarts = set(readings.breaks.tolist())
    pairs = zip(readings.time.tolist(), readings.value.tolist(), strict=True)
    for index, (time, value) in enumerate(pairs):
        if index in restarts:
            gather.abandon()
        found.append(gather.add(value, time, (index, time, None, None)))
    return [each for each in found if each is not None], len(given_up)


def made(start: int, steps: list[tuple[int, float, bool]]) -> StreamReadings:
    time = start + np.cumsum([step for step, _, _ in steps], dtype=np.int64)
    breaks = [i for i, (_, _, restart) in enumerate(steps) if restart and i]
    values = np.array([value for _, value, _ in steps], np.float64)
    return StreamReadings((), time, values, np.array(breaks, np.int64))


def same(ours: Subgroups, theirs: list[Subgroup], broken: bool) -> None:
    assert ours.spans.stop.tolist() == [each.identity[0] + 1 for each in theirs]
    assert ours.statistics.n.tolist() == [each.size for each in theirs]
    assert ours.first.tolist() == [each.first for each in theirs]
    assert ours.last.tolist() == [each.last for each in theirs]
    if broken:
        assert ours.spans.broken.tolist() == [each.broken for each in theirs]
    statistics = ours.statistics
    np.testing.assert_allclose(statistics.mean, [s.mean for s in theirs], rtol=1e-12, atol=1e-10)
    sds = [np.nan if s.sd is None else s.sd for s in theirs]
    np.testing.assert_allclose(statistics.sd, sds, rtol=1e-9, atol=1e-9)
    ranges = [np.nan if s.range is None else s.range for s in theirs]
    np.testing.assert_array_equal(statistics.range, ranges)


@given(PLANS, st.integers(-100, 10**6), STEPS)
def test_arrays_make_the_subgroups_that_the_gatherers_make(
    plan: SubgroupPlan, start: int, steps: list[tuple[int, float, bool]]
) -> None:
    readings = made(start, steps)
    theirs, given_up = one_by_one(plan, readings)

    ours = subgroups(plan, readings)

    same(ours, theirs, isinstance(plan, ByCount))
    assert ours.spans.abandoned == given_up


@pytest.mark.parametrize(
    "plan", [ByCount(5), ByCount(5, every=60 * SECOND), ByWindow(60 * SECOND, 2)], ids=str
)
def test_no_readings_make_no_subgroups(plan: SubgroupPlan) -> None:
    assert len(subgroups(plan, made(0, []))) == 0
