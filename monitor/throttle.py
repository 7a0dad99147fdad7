"""What is said at once, and what is said at most once in a while.

Knows keys, marks and an instant that it is told. Must not know what is said or how it is sent.
"""

from __future__ import annotations

from heapq import heappop, heappush
from itertools import count
from typing import Generic, TypeVar

Key = TypeVar("Key")


class Throttle(Generic[Key]):
    """Decides when a key is due: at once where its mark changed, else ``interval`` after the last.

    Times are whatever unit the caller uses, all alike.
    """

    __slots__ = ("_heap", "_interval", "_pending", "_said", "_tie")

    def __init__(self, interval: int) -> None:
        self._interval = interval
        self._said: dict[Key, tuple[int, object]] = {}
        self._pending: dict[Key, int] = {}
        # A heap, because it is asked after every batch and there may be ten thousand keys. It may
        # hold what is no longer pending, or pending at another time.
        self._heap: list[tuple[int, int, Key]] = []
        self._tie = count()

    def touch(self, key: Key, mark: object, now: int) -> bool:
        """Something changed; True where it should be said now, else it is kept until it is due.

        ``mark`` is what deserves being said at once when it differs from the last said.
        """
        said = self._said.get(key)
        if said is None or said[1] != mark or now - said[0] >= self._interval:
            self._said[key] = (now, mark)
            self._pending.pop(key, None)
            return True
        if key not in self._pending:
            due = said[0] + self._interval
            self._pending[key] = due
            heappush(self._heap, (due, next(self._tie), key))
        return False

    def due(self, now: int) -> list[Key]:
        """Kept keys whose time has come; they count as said."""
        keys = []
        heap = self._heap
        while heap and heap[0][0] <= now:
            due, _, key = heappop(heap)
            if self._pending.get(key) == due:
                del self._pending[key]
                self._said[key] = (now, self._said[key][1])
                keys.append(key)
        return keys
