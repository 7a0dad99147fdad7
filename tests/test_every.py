"""Subgroups at intervals: when the next one starts, and what becomes of the readings between."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import GAUGE, characteristic, engine, events, fold, points, reading, shewhart

from monitor.engine import Engine
from monitor.outputs import SetAside
from monitor.plan import ByCount, CharacteristicPlan
from monitor.times import SECOND


def sampled(size: int, every: int, max_gap: int | None = None) -> CharacteristicPlan:
    """``every`` and ``max_gap`` in seconds."""
    plan = characteristic(shewhart(chart="mean" if size > 1 else "individual"))
    gap = None if max_gap is None else max_gap * SECOND
    return replace(plan, subgroup=ByCount(size, gap, every * SECOND))


def feed(watching: Engine, seconds: list[int]) -> list[tuple[float, ...]]:
    """The subgroups of readings whose values are their times."""
    outputs = fold(watching, [reading(float(t), t, n) for n, t in enumerate(seconds)])
    assert not any(isinstance(output, SetAside) for output in outputs)
    assert watching.counts.readings == len(seconds)
    return [p.subgroup.values for p in points(outputs)]


def expected_of(
    times: list[int], size: int, every: int, max_gap: int | None
) -> tuple[list[tuple[float, ...]], int]:
    """The subgroups, and how many were abandoned, from all readings at once."""
    made: list[tuple[float, ...]] = []
    abandoned = 0
    start, free = None, 0
    while True:
        at = next(
            (i for i in range(free, len(times)) if start is None or times[i] >= start + every), None
        )
        if at is None:
            return made, abandoned
        start = times[at]
        end = at + size
        broken = [
            i
            for i in range(at + 1, min(end, len(times)))
            if max_gap is not None and times[i] - times[i - 1] > max_gap
        ]
        if broken:
            abandoned += 1
            free = broken[0]
            continue
        if end > len(times):
            return made, abandoned
        made.append(tuple(float(t) for t in times[at:end]))
        free = end


@settings(max_examples=300, deadline=None)
@given(
    st.lists(st.integers(0, 7), max_size=50),
    st.integers(1, 4),
    st.integers(1, 20),
    st.sampled_from([None, 0, 2, 5]),
)
def test_each_starts_at_the_first_reading_after_the_interval(
    steps: list[int], size: int, every: int, max_gap: int | None
) -> None:
    times = [sum(steps[: n + 1]) for n in range(len(steps))]
    watching = engine(sampled(size, every, max_gap))
    made, abandoned = expected_of(times, size, every, max_gap)
    assert feed(watching, times) == made
    assert (watching.counts.subgroups, watching.counts.abandoned) == (len(made), abandoned)
    numbers = [s.last.number if s.last else 0 for s in watching.streams()]
    assert numbers == ([len(made)] if times else [])


def test_five_readings_every_half_hour() -> None:
    watching = engine(sampled(5, 1_800))
    made = feed(watching, list(range(100, 5_000, 7)))
    assert [(s[0], s[-1]) for s in made] == [(100, 128), (1_906, 1_934), (3_712, 3_740)]


def test_a_reading_just_at_the_interval_starts_the_next() -> None:
    assert feed(engine(sampled(1, 10)), [3, 12, 13, 22, 23]) == [(3.0,), (13.0,), (23.0,)]


def test_a_subgroup_that_takes_longer_than_the_interval_is_followed_at_once() -> None:
    assert feed(engine(sampled(3, 2)), [0, 1, 5, 6, 7, 8]) == [(0.0, 1.0, 5.0), (6.0, 7.0, 8.0)]


def test_the_interval_counts_from_a_start_that_came_to_nothing_too() -> None:
    watching = engine(sampled(3, 100, max_gap=10))
    # The second and third reading lie too far apart; what comes next waits for the interval.
    assert feed(watching, [0, 1, 50, 51, 52, 99, 100, 101, 102]) == [(100.0, 101.0, 102.0)]
    assert watching.counts.abandoned == 1


@pytest.mark.parametrize(("between", "broken"), [([], True), ([20, 30, 40], False)])
def test_readings_between_show_that_no_gap_was_there(between: list[int], broken: bool) -> None:
    watching = engine(sampled(1, 40, max_gap=15))
    times = [10, *between, 50]
    outputs = fold(watching, [reading(0.0, t, n) for n, t in enumerate(times)])
    assert [p.subgroup.broken for p in points(outputs)] == [False, broken]
    assert watching.counts.abandoned == 0


def test_a_gap_among_the_readings_between_breaks_the_moving_range() -> None:
    plan = replace(sampled(1, 40, max_gap=15), judgement=None)
    judged = characteristic(shewhart(chart="moving_range"))
    watching = engine(replace(plan, judgement=judged.judgement))
    times = [0, 10, 20, 30, 40, 50, 70, 80, 90, 100, 110, 120]
    outputs = fold(watching, [reading(float(t), t, n) for n, t in enumerate(times)])
    assert [[row.value for row in p.rows] for p in points(outputs)] == [[], [40.0], [], [40.0]]


def test_an_alert_is_of_the_subgroups_last_reading() -> None:
    watching = engine(sampled(2, 60))
    outputs = fold(watching, [reading(9.0, t, n) for n, t in enumerate(range(0, 130, 10))])
    raised = events(outputs)[0]
    assert (raised["event"], raised["time"]) == ("raised", "2026-03-02T06:41:22.000Z")
    assert [p.subgroup.number for p in points(outputs)] == [1, 2]


def test_streams_keep_their_own_intervals() -> None:
    source = replace(GAUGE, stream=(("head", ("head",)),))
    watching = engine(replace(sampled(1, 10), source=source))
    readings = [reading(float(t), t, t, head=t % 2) for t in (0, 3, 9, 10, 12, 13)]
    made = [(dict(p.stream)["head"], p.subgroup.values) for p in points(fold(watching, readings))]
    assert made == [("0", (0.0,)), ("1", (3.0,)), ("0", (10.0,)), ("1", (13.0,))]
