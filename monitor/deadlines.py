"""Deadlines, fired in order, in watched time: the time in which readings could reach us.

Knows instants and whom they are for. Must not know what happens at a deadline. Our own outage is
not the gauge's: watched time stands still from the last entry before it until we are connected
again.
"""

from __future__ import annotations

import heapq
from typing import Any

Owner = tuple[str, tuple[str, ...]]
"""Characteristic and stream values: equal deadlines fire in this order."""

_SPARE = 64


class Deadlines:
    """One deadline an owner at most. All instants in microseconds."""

    __slots__ = ("_due", "_frozen", "_outages", "_queued", "heap")

    def __init__(self) -> None:
        self.heap: list[tuple[int, Owner]] = []
        """Empty while nothing can become due."""
        self._due: dict[Owner, int] = {}
        self._queued: dict[Owner, int] = {}
        self._outages = 0
        self._frozen: int | None = None

    def watched(self, time: int) -> int:
        """Watched time at an arrival."""
        return time - self._outages if self._frozen is None else self._frozen

    def freeze(self, last: int) -> None:
        """An outage: nothing was watched after the entry at ``last``."""
        self._frozen = self.watched(last)

    def resume(self, time: int) -> None:
        """Watched again from this arrival on."""
        if self._frozen is not None:
            self._outages = time - self._frozen
            self._frozen = None

    def set(self, owner: Owner, deadline: int) -> None:
        """Fire for ``owner`` at this watched time, and at no other."""
        self._due[owner] = deadline
        queued = self._queued.get(owner)
        # A deadline moves with nearly every reading, and nearly always later: it is queued again
        # only when its old place comes up.
        if queued is None or deadline < queued:
            self._queued[owner] = deadline
            heapq.heappush(self.heap, (deadline, owner))
            if len(self.heap) > 2 * len(self._due) + _SPARE:
                self._tidy()

    def cancel(self, owner: Owner) -> None:
        """Nothing is due for ``owner``."""
        self._due.pop(owner, None)

    def pop(self, time: int) -> Owner | None:
        """The owner of the earliest deadline not after this arrival; it is due no more."""
        now = self.watched(time)
        while self.heap and self.heap[0][0] <= now:
            deadline, owner = heapq.heappop(self.heap)
            if self._queued.get(owner) == deadline:
                del self._queued[owner]
            due = self._due.get(owner)
            if due == deadline:
                del self._due[owner]
                return owner
            if due is not None:
                self.set(owner, due)
        return None

    def next(self) -> int | None:
        """The arrival at which to look again; None while nothing can become due."""
        if not self.heap or self._frozen is not None:
            return None
        return self.heap[0][0] + self._outages

    def _tidy(self) -> None:
        # Each move to an earlier time leaves a place behind, and while a backlog is read every
        # deadline moves earlier with every reading.
        self.heap[:] = [(deadline, owner) for owner, deadline in self._due.items()]
        heapq.heapify(self.heap)
        self._queued = dict(self._due)

    def state(self) -> dict[str, Any]:
        """All of it, as JSON values."""
        due = [[name, list(keys), at] for (name, keys), at in sorted(self._due.items())]
        return {"due": due, "outages": self._outages, "frozen": self._frozen}

    def restore(self, state: dict[str, Any]) -> None:
        """Take back what ``state`` gave."""
        self._outages, self._frozen = state["outages"], state["frozen"]
        for name, keys, at in state["due"]:
            self.set((name, tuple(keys)), at)
