"""Deadlines, against a list that is sorted whenever something is asked of it."""

from __future__ import annotations

import orjson
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.deadlines import Deadlines, Owner

A: Owner = ("torque", ())
B: Owner = ("weight", ("1", "4"))
C: Owner = ("weight", ("1", "5"))


class Naive:
    """Keeps what is due and every outage; works all else out when asked."""

    def __init__(self) -> None:
        self.due: dict[Owner, int] = {}
        self.outages: list[tuple[int, int]] = []
        self.since: int | None = None

    def watched(self, time: int) -> int:
        lost = sum(end - start for start, end in self.outages)
        return (time if self.since is None else self.since) - lost

    def pop(self, time: int) -> list[Owner]:
        fired = sorted((at, owner) for owner, at in self.due.items() if at <= self.watched(time))
        for _, owner in fired:
            del self.due[owner]
        return [owner for _, owner in fired]

    def next(self) -> int | None:
        if not self.due or self.since is not None:
            return None
        return min(self.due.values()) + sum(end - start for start, end in self.outages)


def fire(deadlines: Deadlines, time: int) -> list[Owner]:
    fired = []
    while (owner := deadlines.pop(time)) is not None:
        fired.append(owner)
    return fired


def again(deadlines: Deadlines) -> Deadlines:
    """What another process makes of the state."""
    restored = Deadlines()
    restored.restore(orjson.loads(orjson.dumps(deadlines.state())))
    return restored


owners = st.sampled_from([A, B, C, ("weight", ("10", "4")), ("weight", ())])
steps = st.lists(
    st.one_of(
        st.tuples(st.just("set"), owners, st.integers(1, 12)),
        st.tuples(st.just("cancel"), owners, st.just(0)),
        st.tuples(st.sampled_from(["pass", "stop", "watch", "restart"]), st.none(), st.just(0)),
        st.tuples(st.just("pass"), st.none(), st.integers(0, 6)),
    ),
    max_size=60,
)


@settings(max_examples=300, deadline=None)
@given(steps)
def test_they_fire_as_those_of_a_sorted_list_do(steps: list[tuple[str, Owner, int]]) -> None:
    deadlines, naive, now = Deadlines(), Naive(), 0
    for step, owner, amount in steps:
        match step:
            case "set":
                deadlines.set(owner, deadlines.watched(now) + amount)
                naive.due[owner] = naive.watched(now) + amount
            case "cancel":
                deadlines.cancel(owner)
                naive.due.pop(owner, None)
            case "stop":
                deadlines.freeze(now)
                naive.since = now if naive.since is None else naive.since
            case "watch":
                deadlines.resume(now)
                if naive.since is not None:
                    naive.outages.append((naive.since, now))
                    naive.since = None
            case "restart":
                deadlines = again(deadlines)
            case "pass":
                now += amount
                assert fire(deadlines, now) == naive.pop(now)
        assert deadlines.watched(now) == naive.watched(now)
        due, look = naive.next(), deadlines.next()
        # To look too early costs a tick that does nothing; to look too late, a late alert.
        assert due is None or (look is not None and look <= due)
        assert deadlines.heap or not naive.due
    assert deadlines.state()["due"] == [
        [name, list(keys), at] for (name, keys), at in sorted(naive.due.items())
    ]


def test_equal_deadlines_fire_in_the_order_of_their_streams() -> None:
    deadlines = Deadlines()
    for owner in (C, A, B):
        deadlines.set(owner, 5)
    deadlines.set(("weight", ("1", "10")), 4)
    assert fire(deadlines, 4) == [("weight", ("1", "10"))]
    assert fire(deadlines, 9) == [A, B, C]
    assert fire(deadlines, 99) == []


def test_a_deadline_that_moves_fires_only_where_it_went() -> None:
    deadlines = Deadlines()
    deadlines.set(A, 10)
    deadlines.set(B, 20)
    deadlines.set(A, 30)
    deadlines.set(B, 15)
    assert fire(deadlines, 14) == []
    assert fire(deadlines, 15) == [B]
    assert fire(deadlines, 29) == []
    assert fire(deadlines, 30) == [A]


def test_one_that_is_cancelled_does_not_fire_until_it_is_set_again() -> None:
    deadlines = Deadlines()
    deadlines.set(A, 10)
    deadlines.cancel(A)
    deadlines.cancel(B)
    assert fire(deadlines, 10) == []
    deadlines.set(A, 12)
    assert fire(deadlines, 12) == [A]


def test_no_time_is_watched_from_the_last_entry_to_the_next_connection() -> None:
    deadlines = Deadlines()
    deadlines.set(A, 10)
    deadlines.freeze(4)
    assert deadlines.next() is None
    assert deadlines.watched(1_000) == 4
    assert fire(deadlines, 1_000) == []
    deadlines.freeze(1_000)  # the process ended too, and began again
    deadlines.resume(2_000)
    assert deadlines.next() == 2_006
    assert fire(deadlines, 2_005) == []
    assert fire(deadlines, 2_006) == [A]


def test_what_is_set_during_an_outage_counts_from_its_end() -> None:
    deadlines = Deadlines()
    deadlines.freeze(100)
    deadlines.set(A, deadlines.watched(150) + 7)
    deadlines.resume(300)
    assert fire(deadlines, 306) == []
    assert fire(deadlines, 307) == [A]


def test_a_connection_that_follows_none_changes_nothing() -> None:
    deadlines = Deadlines()
    deadlines.set(A, 10)
    deadlines.resume(500)
    assert deadlines.watched(501) == 501


@pytest.mark.parametrize("stopped", [False, True])
def test_the_state_outlives_the_process(stopped: bool) -> None:
    deadlines = Deadlines()
    deadlines.freeze(0)
    deadlines.resume(100)
    for owner, at in ((C, 7), (A, 9), (B, 7)):
        deadlines.set(owner, at)
    if stopped:
        deadlines.freeze(103)
    restored = again(deadlines)
    assert restored.state() == deadlines.state()
    if stopped:
        assert fire(restored, 10_000) == []
        restored.resume(10_000)
        assert fire(restored, 10_003) == []
    lag = 10_000 - 103 if stopped else 0
    assert restored.next() == 107 + lag
    assert fire(restored, 107 + lag) == [B, C]
    assert fire(restored, 109 + lag) == [A]


def test_a_backlog_that_moves_a_deadline_earlier_all_the_time_piles_nothing_up() -> None:
    deadlines = Deadlines()
    for step in range(10_000):
        deadlines.set(A, 100_000 - step)
        deadlines.set(B, 200_000 - step)
    assert len(deadlines.heap) < 200
    assert fire(deadlines, 90_000) == []
    assert fire(deadlines, 90_001) == [A]
    assert fire(deadlines, 190_001) == [B]


def test_what_fired_is_in_order_whatever_was_piled_up() -> None:
    deadlines = Deadlines()
    owners: list[Owner] = [("weight", (str(head),)) for head in range(50)]
    for step in range(20):
        for place, owner in enumerate(owners):
            deadlines.set(owner, 10_000 - 100 * step + place * 7 % 50)
    fired = fire(deadlines, 10_000)
    due = [(place * 7 % 50, owner) for place, owner in enumerate(owners)]
    assert fired == [owner for _, owner in sorted(due)]
