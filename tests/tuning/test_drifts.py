"""Drifts in readings, against the engine's own gathering of the same changed readings."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.plan import BaselinePlan, ByCount, ByWindow, SubgroupPlan
from monitor.subgroups import Subgroup, gatherer
from monitor.times import SECOND
from replay.readings import StreamReadings
from replay.tuning.changed import Drift, drifted, resolution
from replay.tuning.drifts import WARM, Onset, Onsets, before, follow, onsets
from replay.tuning.grouped import Grouped, group

BASELINE = BaselinePlan(341.2, 1.9, 0.4, "")
ANYWHERE = (-1e100, 1e100)


def grouped(how: SubgroupPlan, *streams: StreamReadings) -> Grouped:
    found = []
    for each in streams:
        one = group(
            how,
            each,
            fit_to=int(each.time[len(each.time) * 6 // 10]),
            prove_from=int(each.time[len(each.time) * 6 // 10]),
            left_out=(),
            baseline=BASELINE,
        )
        assert one is not None
        found.append(one)
    return Grouped(how, getattr(how, "size", 6), tuple(found))


def readings(count: int, seed: int = 1, pauses: int = 0, breaks: int = 0) -> StreamReadings:
    rng = np.random.default_rng(seed)
    gaps = np.full(count, SECOND)
    gaps[rng.integers(1, count, pauses)] = 60 * SECOND
    return StreamReadings(
        (),
        np.cumsum(gaps),
        np.round(rng.normal(341.2, 1.9, count), 1),
        np.unique(rng.integers(1, count, breaks)),
    )


def by_engine(how: SubgroupPlan, held: StreamReadings, values: np.ndarray) -> list[Subgroup]:
    """The subgroups of the whole stream; an identity's first is its last reading's place."""
    gathered = gatherer(how, lambda: None)
    found = []
    for place, (value, time) in enumerate(zip(values.tolist(), held.time.tolist(), strict=True)):
        if place in held.breaks:
            gathered.abandon()
        if np.isnan(value):
            continue
        subgroup = gathered.add(value, time, (place, None, None, None))
        if subgroup is not None:
            found.append(subgroup)
    return found


@settings(max_examples=40, deadline=None)
@given(
    how=st.sampled_from(
        [
            ByCount(1),
            ByCount(5),
            ByCount(4, max_gap=30 * SECOND),
            ByCount(3, every=11 * SECOND),
            ByWindow(7 * SECOND, 3),
        ]
    ),
    shape=st.sampled_from(["step", "ramp", "spread"]),
    seed=st.integers(0, 1_000),
    pauses=st.integers(0, 20),
    breaks=st.integers(0, 4),
    plausible=st.sampled_from([ANYWHERE, (335.0, 347.0)]),
)
def test_followed_subgroups_are_the_engines(
    how: SubgroupPlan,
    shape: str,
    seed: int,
    pauses: int,
    breaks: int,
    plausible: tuple[float, float],
) -> None:
    """One long pass of the engine over the changed readings, implausible ones left out, gives the
    same subgroups after each onset."""
    held = readings(1_000, seed, pauses, breaks)
    undisturbed = (held.value >= plausible[0]) & (held.value <= plausible[1])
    held = StreamReadings(
        (),
        held.time[undisturbed],
        held.value[undisturbed],
        np.unique(np.concatenate(([0], np.cumsum(undisturbed)))[held.breaks]),
    )
    ours = grouped(how, held)
    size = len(held.value)
    places = (Onset(0, size - 150, 1), Onset(0, size - 300, -1))
    begun = Onsets(places, 90, np.random.default_rng(seed).random((2, 90)))
    amount = 1.5 if shape == "spread" else 2.04
    drift = Drift(shape, amount, 40, 0.1, plausible)  # type: ignore[arg-type]
    followed = follow(ours, begun, drift, 90)
    for row, onset in enumerate(places):
        values = held.value.copy()
        end = onset.reading + 90
        since = np.arange(90)
        values[onset.reading : end] = drifted(
            values[onset.reading : end],
            since,
            np.full(90, onset.side),
            np.full(90, BASELINE.mean),
            drift,
            begun.chance[row],
        )
        values[(values < plausible[0]) | (values > plausible[1])] = np.nan
        expected = [
            each
            for each in by_engine(how, held, values)
            if each.identity[0] is not None and onset.reading <= each.identity[0] < end
        ]
        there = followed.columns.there[:, row]
        away = followed.columns.away[there, row]
        if isinstance(how, ByWindow):
            expected = expected[: len(away)]  # a window that is cut off by the end is not judged
            assert len(away) >= 90 // 7 - 3
        assert away == pytest.approx([e.mean - BASELINE.mean for e in expected], abs=1e-9)
        assert followed.instant[there, row].tolist() == [e.last for e in expected]
        assert followed.readings[there, row].tolist() == [
            (e.identity[0] or 0) - onset.reading + 1 for e in expected
        ]


def test_what_came_before_is_undisturbed_and_near() -> None:
    held = readings(5_000)
    ours = grouped(ByCount(5), held)
    begun = Onsets((Onset(0, 4_002, 1),), 100, np.zeros((1, 100)))
    columns = before(ours, begun)
    assert len(columns) == WARM
    means = held.value[:4_000].reshape(-1, 5).mean(axis=1)[-WARM:]
    assert columns.away[:, 0] == pytest.approx(means - BASELINE.mean)


def test_onsets_are_stratified_over_the_last_part() -> None:
    ours = grouped(ByCount(5), *(readings(6_000, seed) for seed in range(3)))
    begun = onsets(ours, 100, np.random.default_rng(1))
    assert len(begun.places) >= 200
    for stream in range(3):
        of_stream = [o for o in begun.places if o.stream == stream]
        assert abs(sum(o.side for o in of_stream)) <= 1
        first = int(ours.streams[stream].start[ours.streams[stream].prove])
        edges = np.linspace(first, 5_900, len(of_stream) + 1)
        for onset, low, high in zip(of_stream, edges[:-1], edges[1:], strict=True):
            assert int(low) <= onset.reading <= high


@pytest.mark.parametrize(("amount", "step"), [(0.25, 0.1), (0.3, 0.1), (1.0, 2.0)])
def test_rounding_is_right_on_average(amount: float, step: float) -> None:
    rng = np.random.default_rng(1)
    values = np.round(rng.normal(341.2, 1.9, 40_000) / step) * step
    drift = Drift("step", amount, 200, step, ANYWHERE)
    chance = rng.random(40_000)
    ones = np.ones(40_000)
    changed = drifted(values, np.arange(40_000), ones.astype(int), ones, drift, chance)
    steps = changed / step
    assert steps == pytest.approx(np.round(steps), abs=1e-6)
    assert (changed - values).mean() == pytest.approx(amount, abs=step / 100)
    untouched = drifted(values, np.arange(40_000) - 40_000, -ones.astype(int), ones, drift, chance)
    assert np.array_equal(untouched, values)


def test_the_gauges_step_is_found() -> None:
    rng = np.random.default_rng(1)
    values = rng.normal(341.2, 1.9, 5_000)
    for step in (0.1, 0.05, 2.0):
        assert resolution([made(np.round(values / step) * step)]) == step
    assert resolution([made(values)]) is None
    assert resolution([made(np.full(10, 3.0))]) is None


def made(values: np.ndarray) -> StreamReadings:
    return StreamReadings((), np.arange(len(values)), values, np.empty(0, np.int64))
