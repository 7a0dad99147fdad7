"""Gathering, against grouping that looks at all readings at once."""

from __future__ import annotations

import statistics

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.plan import ByCount
from monitor.subgroups import CountGatherer, Subgroup

NOBODY = (None, None, None, None)


def gather(plan: ByCount, readings: list[tuple[float, int]]) -> tuple[list[Subgroup], int]:
    given_up: list[None] = []
    gatherer = CountGatherer(plan, lambda: given_up.append(None))
    made = [gatherer.add(v, t, (i, t, None, None)) for i, (v, t) in enumerate(readings)]
    return [each for each in made if each], len(given_up)


@given(
    st.lists(st.tuples(st.floats(-10, 10, width=16), st.integers(0, 4)), max_size=40),
    st.integers(1, 5),
    st.sampled_from([None, 1, 3]),
)
def test_subgroups_are_full_slices_of_unbroken_stretches(
    steps: list[tuple[float, int]], size: int, max_gap: int | None
) -> None:
    readings, now = [], 0
    for value, step in steps:
        now += step
        readings.append((value, now))
    made, abandoned = gather(ByCount(size, max_gap), readings)

    stretches: list[list[tuple[float, int]]] = []
    for reading in readings:
        gap = reading[1] - stretches[-1][-1][1] if stretches else 0
        if not stretches or (max_gap is not None and gap > max_gap):
            stretches.append([])
        stretches[-1].append(reading)
    expected = [
        (tuple(v for v, _ in part), part[0][1], part[-1][1], index > 0 and start == 0)
        for index, stretch in enumerate(stretches)
        for start in range(0, len(stretch), size)
        if len(part := stretch[start : start + size]) == size
    ]
    # A stretch too short for a subgroup leaves its break to the next subgroup, wherever that is.
    assert [(s.values, s.first, s.last) for s in made] == [e[:3] for e in expected]
    assert all(s.broken for s, e in zip(made, expected, strict=True) if e[3])
    assert [s.number for s in made] == list(range(1, len(made) + 1))
    assert abandoned == sum(len(stretch) % size > 0 for stretch in stretches[:-1])


def test_a_gap_is_strictly_longer_than_max_gap() -> None:
    plan = ByCount(2, 30)
    made, abandoned = gather(plan, [(1.0, 0), (2.0, 30)])
    assert ([s.values for s in made], abandoned) == ([(1.0, 2.0)], 0)
    made, abandoned = gather(plan, [(1.0, 0), (2.0, 31), (3.0, 31)])
    assert ([s.values for s in made], abandoned) == ([(2.0, 3.0)], 1)
    assert made[0].broken


def test_a_gap_between_subgroups_abandons_nothing_but_is_a_break() -> None:
    made, abandoned = gather(ByCount(1, 30), [(1.0, 0), (2.0, 31), (3.0, 32)])
    assert [s.broken for s in made] == [False, True, False]
    assert abandoned == 0


def test_abandoning_counts_what_was_begun_and_breaks() -> None:
    given_up: list[None] = []
    gatherer = CountGatherer(ByCount(2), lambda: given_up.append(None))
    gatherer.abandon()
    assert len(given_up) == 0
    gatherer.add(1.0, 0, NOBODY)
    gatherer.abandon()
    gatherer.abandon()
    assert len(given_up) == 1
    assert gatherer.add(2.0, 1, NOBODY) is None
    made = gatherer.add(3.0, 2, NOBODY)
    assert made is not None
    assert (made.number, made.values, made.broken) == (1, (2.0, 3.0), True)


def test_a_subgroup_is_known_by_its_last_reading() -> None:
    made, _ = gather(ByCount(3), [(1.0, 5), (2.0, 6), (3.0, 7)])
    assert (made[0].first, made[0].last, made[0].identity) == (5, 7, (2, 7, None, None))


@given(st.lists(st.floats(-1e6, 1e6), min_size=2, max_size=10))
def test_statistics_agree_with_the_standard_library(values: list[float]) -> None:
    made, _ = gather(ByCount(len(values)), [(v, 0) for v in values])
    only = made[0]
    assert only.mean == pytest.approx(statistics.fmean(values), abs=1e-9)
    assert only.range == max(values) - min(values)
    assert only.sd == pytest.approx(statistics.stdev(values), abs=1e-9)


def test_a_single_reading_has_neither_range_nor_sd() -> None:
    made, _ = gather(ByCount(1), [(4.25, 0)])
    assert (made[0].mean, made[0].range, made[0].sd) == (4.25, None, None)
