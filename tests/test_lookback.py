"""The ring of subgroups, against a list that keeps them all."""

from __future__ import annotations

import math

import orjson
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.lookback import LookBack, Shift
from monitor.methods.onset import LOOK_BACK, estimate
from monitor.plan import Direction


def filled(z: list[float]) -> LookBack:
    lookback = LookBack()
    for index, value in enumerate(z):
        lookback.append(value, 10 * index, 4)
    return lookback


def error(size: int) -> float:
    """Of the mean of ``size`` readings that spread by 2: 1 where there are four of them."""
    return 2.0 / math.sqrt(size)


@given(
    st.lists(st.floats(-4, 4, width=16), min_size=1, max_size=30),
    st.integers(0, 2 * LOOK_BACK),
    st.sampled_from(["up", "down"]),
)
def test_only_the_last_subgroups_are_looked_at(
    z: list[float], earlier: int, direction: Direction
) -> None:
    series = [0.25] * earlier + z
    shift = filled(series).shift(direction, error)
    start = max(0, len(series) - LOOK_BACK)
    onset = estimate(series[start:], 1 if direction == "up" else -1)
    assert shift == Shift(
        size=pytest.approx(onset.size),
        onset=10 * (start + onset.index),
        earliest=None if onset.first is None else 10 * (start + onset.first - 1),
        latest=10 * (start + onset.last),
    )


def test_a_shift_older_than_the_ring_has_no_earliest_moment() -> None:
    shift = filled([0.0] * 50 + [1.5] * LOOK_BACK).shift("up", error)
    assert shift.size == 1.5
    assert shift.onset == 10 * 50
    assert shift.earliest is None


def test_a_forgotten_shift_is_not_the_onset_of_the_next() -> None:
    lookback = filled([0.0] * 20 + [4.0] * 20)
    lookback.forget("up")
    for index in range(40, 60):
        lookback.append(0.0 if index < 50 else 1.0, 10 * index, 4)
    assert lookback.shift("up", error).onset == 500
    assert lookback.shift("up", error).size == 1.0


def test_one_side_forgets_nothing_of_the_other() -> None:
    lookback = filled([0.0] * 20 + [-2.0] * 20)
    lookback.forget("up")
    assert lookback.shift("down", error).onset == 200
    with pytest.raises(ValueError):
        lookback.shift("up", error)


def test_what_was_forgotten_may_fall_out_of_the_ring() -> None:
    lookback = filled([5.0] * 10)
    lookback.forget("up")
    for index in range(10, 10 + 3 * LOOK_BACK):
        lookback.append(1.0, 10 * index, 4)
    assert lookback.shift("up", error).onset == 10 * (10 + 2 * LOOK_BACK)


def test_clearing_forgets_both_sides_and_what_was_forgotten() -> None:
    lookback = filled([3.0] * 10)
    lookback.forget("up")
    lookback.clear()
    lookback.append(2.0, 7, 4)
    assert lookback.shift("up", error) == Shift(size=2.0, onset=7, earliest=None, latest=7)


def test_one_wild_value_long_ago_is_not_the_onset_of_a_drift() -> None:
    shift = filled([0.0] * 20 + [1000.0] + [0.0] * 80 + [1.0] * 12).shift("up", error)
    assert (shift.onset, shift.size) == (1010, 1.0)


@pytest.mark.filterwarnings("error")
def test_an_absurd_value_is_an_onset_and_no_error() -> None:
    shift = filled([0.0] * 10 + [1e200, 1e200]).shift("up", error)
    assert (shift.onset, shift.size) == (100, 1e200)


@pytest.mark.parametrize("count", [1, 7, LOOK_BACK, LOOK_BACK + 1, 2 * LOOK_BACK + 50])
def test_a_shift_is_the_same_in_subgroups_of_all_sizes(count: int) -> None:
    lookback = LookBack()
    for index in range(count):
        size = 1 + index * index % 59
        lookback.append(-3.0 / error(size), 10 * index, size)
    assert lookback.shift("down", error).size == pytest.approx(-3.0)


def test_each_subgroup_counts_by_how_much_it_tells() -> None:
    lookback = LookBack()
    lookback.append(2.0 / error(100), 0, 100)
    lookback.append(8.0 / error(1), 10, 1)
    # With nothing between subgroups that is the mean of all readings.
    assert lookback.shift("up", error).size == pytest.approx((100 * 2.0 + 8.0) / 101)


@given(st.lists(st.integers(1, 3), max_size=12), st.sampled_from([0, LOOK_BACK, 350]))
def test_a_restored_ring_goes_on_as_the_other(sizes: list[int], earlier: int) -> None:
    kept, restored = LookBack(), LookBack()
    series = [4] * earlier + sizes + [2, 2]
    for index, size in enumerate(series[:-1]):
        kept.append(1.0 + index % 3, 10 * index, size)
        if index == earlier // 2:
            kept.forget("up")
    restored.restore(orjson.loads(orjson.dumps(kept.state())))
    for each in (kept, restored):
        each.append(9.0, 10 * len(series), series[-1])
    assert restored.state() == kept.state()
    assert restored.evidence() == kept.evidence()
    assert restored.shift("up", error) == kept.shift("up", error)
    assert restored.shift("down", error) == kept.shift("down", error)


def test_evidence_is_all_that_is_held_the_newest_last() -> None:
    lookback = LookBack()
    for index in range(LOOK_BACK + 3):
        lookback.append(float(index), 10 * index, 4)
    first, values, sizes = lookback.evidence()
    assert values == tuple(float(index) for index in range(3, LOOK_BACK + 3))
    assert first == tuple(10 * index for index in range(3, LOOK_BACK + 3))
    assert sizes == (4,) * LOOK_BACK
