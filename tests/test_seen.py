"""Identities and counters, against a model that keeps everything it ever saw."""

from __future__ import annotations

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.seen import WINDOW, StreamSeen, TopicCounter, Verdict, ahead

NEW, RESTART = Verdict.NEW, Verdict.RESTART
REPEATED, LATE = Verdict.REPEATED, Verdict.LATE


class Remembering:
    """The contract, word for word, for readings with a time and a sequence number."""

    def __init__(self) -> None:
        self.accepted: set[int] = set()
        self.mark = -1

    def admit(self, time: int, number: int) -> Verdict:
        if time <= self.mark and number in self.accepted:
            return REPEATED
        if time < self.mark:
            return LATE
        fell = bool(self.accepted) and number < max(self.accepted) and time > self.mark
        if fell:
            self.accepted.clear()
        self.accepted.add(number)
        self.mark = time
        return RESTART if fell else NEW


@given(st.lists(st.tuples(st.integers(0, 9), st.integers(0, 9)), max_size=40))
def test_readings_with_time_and_number_are_judged_as_the_contract_says(
    given_readings: list[tuple[int, int]],
) -> None:
    seen, model = StreamSeen(None), Remembering()
    for time, number in given_readings:
        assert seen.admit(time, True, number) is model.admit(time, number)


numbers = st.integers(0, 12) | st.integers(0, 2**63 - 1) | st.integers(WINDOW - 2, WINDOW + 2)


@given(
    st.lists(st.tuples(st.integers(0, 5), numbers | st.none()), max_size=30),
    st.booleans(),
    st.sampled_from([None, 2, 7, 256, 65_536, 2**63]),
)
def test_what_was_accepted_is_a_repeat_when_it_comes_at_once_again(
    given_readings: list[tuple[int, int | None]], timed: bool, wraps: int | None
) -> None:
    seen = StreamSeen(wraps)
    for time, number in given_readings:
        if wraps and number is not None:
            number %= wraps
        verdict = seen.admit(time, timed, number)
        if verdict in (NEW, RESTART) and (timed or number is not None):
            assert seen.admit(time, timed, number) is REPEATED


def test_a_number_far_behind_at_an_equal_time_is_accepted_once() -> None:
    # Its place in the window of bits would be 2^62 bits away.
    seen = StreamSeen(None)
    assert seen.admit(10, True, 2**62) is NEW
    assert seen.admit(10, True, 5) is NEW
    assert seen.admit(10, True, 5) is REPEATED
    assert seen.admit(11, True, 2**62 + 1) is NEW


@pytest.mark.parametrize(
    ("readings", "verdicts"),
    [
        # (time, number) one after another
        ([(1, 1), (1, 1)], [NEW, REPEATED]),
        ([(1, 1), (2, 2), (1, 1)], [NEW, NEW, REPEATED]),
        ([(1, 1), (3, 3), (2, 2)], [NEW, NEW, LATE]),
        ([(1, 1), (1, 2), (1, 3), (1, 2)], [NEW, NEW, NEW, REPEATED]),
        ([(1, 3), (1, 2)], [NEW, NEW]),  # equal time, new number: also where it fills a hole
        ([(1, 8), (2, 1), (3, 2)], [NEW, RESTART, NEW]),
        ([(1, 8), (2, 1), (1, 8)], [NEW, RESTART, LATE]),
        ([(1, 8), (2, 8)], [NEW, NEW]),  # a counter that stands still is no restart
    ],
)
def test_cases_with_time_and_number(
    readings: list[tuple[int, int]], verdicts: list[Verdict]
) -> None:
    seen = StreamSeen(None)
    assert [seen.admit(time, True, number) for time, number in readings] == verdicts


@pytest.mark.parametrize(
    ("times", "verdicts"),
    [([1, 2, 2], [NEW, NEW, REPEATED]), ([1, 3, 1, 2], [NEW, NEW, REPEATED, LATE])],
)
def test_a_reading_without_number_is_known_by_its_time(
    times: list[int], verdicts: list[Verdict]
) -> None:
    seen = StreamSeen(None)
    assert [seen.admit(time, True, None) for time in times] == verdicts


def test_a_message_that_lacks_its_number_is_known_by_its_time_among_numbered_ones() -> None:
    seen = StreamSeen(None)
    assert seen.admit(5, True, 1) is NEW
    assert seen.admit(5, True, None) is REPEATED
    assert seen.admit(4, True, None) is LATE
    assert seen.admit(6, True, None) is NEW
    assert seen.admit(6, True, 2) is NEW


def test_the_first_number_may_be_late_too() -> None:
    seen = StreamSeen(None)
    assert seen.admit(5, True, None) is NEW
    assert seen.admit(4, True, 1) is LATE
    assert seen.admit(5, True, 1) is NEW


def test_an_arrival_proves_nothing_about_a_repeat() -> None:
    seen = StreamSeen(None)
    assert [seen.admit(time, False, None) for time in (1, 1, 1, 2)] == [NEW] * 4


def test_without_time_a_known_number_is_a_repeat_and_an_unknown_one_late() -> None:
    seen = StreamSeen(None)
    assert [seen.admit(t, False, n) for t, n in enumerate([1, 2, 5, 4, 2, 6])] == [
        NEW,
        NEW,
        NEW,
        LATE,
        REPEATED,
        NEW,
    ]


def test_without_time_a_counter_that_falls_out_of_the_window_has_restarted() -> None:
    seen = StreamSeen(None)
    assert seen.admit(1, False, WINDOW) is NEW
    assert seen.admit(2, False, 1) is LATE
    assert seen.admit(3, False, 0) is RESTART
    assert seen.admit(4, False, 1) is NEW


def test_readings_of_one_arrival_are_told_apart_by_their_place() -> None:
    seen = StreamSeen(None)
    places = []
    for time in (1, 1, 1, 2, 2, 3):
        seen.admit(time, False, None)
        places.append(seen.place)
    assert places == [0, 1, 2, 0, 1, 0]


@given(st.integers(2, 1000), st.data())
def test_ahead_is_the_short_way_round(wraps: int, data: st.DataObject) -> None:
    number, last = (data.draw(st.integers(0, wraps - 1)) for _ in range(2))
    distance = ahead(number, last, wraps)
    assert (last + distance) % wraps == number
    assert abs(distance) <= wraps // 2


def test_a_wrapped_counter_goes_on() -> None:
    seen = StreamSeen(8)
    assert [seen.admit(t, True, t % 8) for t in range(40)] == [NEW] * 40
    assert seen.admit(39, True, 7) is REPEATED
    assert seen.admit(38, True, 6) is REPEATED
    assert seen.admit(40, True, 5) is RESTART


# Missing numbers


@given(
    st.lists(st.sampled_from(["kept", "aside", "lost"]), min_size=1, max_size=60),
    st.integers(0, 300),
    st.sampled_from([None, 256, 65_536]),
)
def test_missing_is_what_was_lost_between_the_first_and_the_last_kept(
    fates: list[str], first: int, wraps: int | None
) -> None:
    counter, missing = TopicCounter(wraps), 0
    for index, fate in enumerate(fates):
        number = (first + index) % wraps if wraps else first + index
        if fate == "kept":
            missing += counter.advance(number, False)
        elif fate == "aside":
            counter.note(number)
    kept = [i for i, fate in enumerate(fates) if fate == "kept"]
    between = fates[kept[0] : kept[-1]] if kept else []
    assert missing == between.count("lost")


def test_a_repeat_and_a_straggler_are_not_missing() -> None:
    counter = TopicCounter(None)
    assert [counter.advance(n, False) for n in (4, 4, 8, 6, 9)] == [0, 0, 3, 0, 0]


def test_after_a_restart_the_gaps_of_every_stream_count() -> None:
    # Two heads share the counter: each sees it fall, the second with a gap since the first.
    counter = TopicCounter(None)
    heads = [(100, False), (101, False), (1, True), (5, True), (6, False)]
    assert [counter.advance(*each) for each in heads] == [0, 0, 0, 3, 0]


def test_a_note_far_ahead_costs_nothing_and_excuses_nothing() -> None:
    counter = TopicCounter(None)
    counter.advance(0, False)
    counter.note(2**62)
    assert counter.advance(2**62 + 1, False) == 2**62


@given(st.lists(st.integers(0, 50), min_size=2, unique=True).map(sorted))
def test_gaps_add_up(kept: list[int]) -> None:
    counter = TopicCounter(None)
    gaps = [counter.advance(number, False) for number in kept]
    assert gaps == [0, *(b - a - 1 for a, b in pairwise(kept))]
