"""What is said at once and what waits, against a plain simulation."""

from __future__ import annotations

from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.throttle import Throttle

INTERVAL = 10


class Plain:
    """The same, by looking at everything every time."""

    def __init__(self) -> None:
        self.said: dict[str, tuple[int, object]] = {}
        self.pending: set[str] = set()

    def touch(self, key: str, mark: object, now: int) -> bool:
        at, last = self.said.get(key, (-INTERVAL, object()))
        if last != mark or now >= at + INTERVAL:
            self.said[key] = now, mark
            self.pending.discard(key)
            return True
        self.pending.add(key)
        return False

    def due(self, now: int) -> set[str]:
        keys = {key for key in self.pending if now >= self.said[key][0] + INTERVAL}
        for key in keys:
            self.said[key] = now, self.said[key][1]
        self.pending -= keys
        return keys


steps = st.tuples(st.integers(0, 7), st.sampled_from(["a", "b", "c", None]), st.integers(0, 1))


@settings(deadline=None)
@given(st.lists(steps, max_size=60))
def test_says_what_a_plain_simulation_says(steps: list[tuple[int, str | None, int]]) -> None:
    throttle: Throttle[str] = Throttle(INTERVAL)
    plain = Plain()
    now = 0
    for passed, key, mark in steps:
        now += passed
        if key is None:
            due = throttle.due(now)
            assert len(set(due)) == len(due)
            assert set(due) == plain.due(now)
        else:
            assert throttle.touch(key, mark, now) == plain.touch(key, mark, now)


def test_says_a_change_at_once_and_the_rest_later() -> None:
    throttle: Throttle[str] = Throttle(INTERVAL)
    assert throttle.touch("a", 1, 0)
    assert not throttle.touch("a", 1, 3)
    assert throttle.touch("a", 2, 4), "its mark changed"
    assert not throttle.touch("a", 2, 5)
    assert throttle.due(13) == []
    assert throttle.due(14) == ["a"]
    assert throttle.due(99) == []


def test_says_the_longest_waiting_first() -> None:
    throttle: Throttle[str] = Throttle(INTERVAL)
    for at, key in enumerate("abc"):
        throttle.touch(key, None, at)
    for key in "cba":
        throttle.touch(key, None, 5)
    assert throttle.due(20) == ["a", "b", "c"]
