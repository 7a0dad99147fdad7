"""What was seen of a stream and of a topic's counter: repeats, late ones, gaps, gauge restarts.

Knows sequence numbers and event times. Must not know values, subgroups or why a reading was
refused.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Sequence
from enum import Enum
from typing import Any

WINDOW = 4096
"""How far behind the newest sequence number a repeat is still told from a restarted counter."""

NEVER = -(2**63)
"""Before every instant."""

_RECENT_TIMES = 64
UNSETTLED = 32


class Verdict(Enum):
    """What a reading's identity says of it."""

    NEW = "new"
    RESTART = "restart"
    REPEATED = "repeated"
    LATE = "late"


def ahead(number: int, last: int, wraps: int | None) -> int:
    """How far ``number`` is ahead of ``last`` on a counter that may wrap; negative: behind."""
    distance = number - last
    if wraps is None:
        return distance
    distance %= wraps
    return distance - wraps if distance > wraps // 2 else distance


class StreamSeen:
    """The identities a stream has accepted.

    Sequence numbers are kept as a sliding window of bits behind the newest (the anti-replay window
    of RFC 4303, section 3.4.3): half a kilobyte, however many readings.
    """

    __slots__ = (
        "_bits",
        "_times",
        "_wraps",
        "ahead_of",
        "closed",
        "last",
        "mark",
        "near",
        "place",
    )

    def __init__(self, wraps: int | None) -> None:
        self.mark = NEVER
        """The time of the latest reading accepted."""
        self.place = 0
        """How many readings before it, all without a number, were of that same time."""
        self._wraps = wraps
        self.closed = NEVER
        self.near = WINDOW - 1 if wraps is None else min(WINDOW - 1, wraps // 2)
        self.last: int | None = None
        self._bits = 0
        self.ahead_of: list[int] = []
        """The numbers before the newest that the bits do not show yet."""
        self._times: deque[int] | None = None

    def admit(self, time: int, timed: bool, sequence: int | None) -> Verdict:
        """Judge a reading by its identity and, unless it is a repeat or late, move the mark.

        ``timed``: the gauge gave the time itself; otherwise ``time`` is the arrival, which proves
        nothing about a repeat.
        """
        if sequence is None:
            return self._admit_by_time(time) if timed else self._advance(time)
        last, mark = self.last, self.mark
        if (
            last is not None
            and 0 < sequence - last <= self.near
            and (not timed or (time > mark and time >= self.closed))
        ):
            # The next, or one soon after it: what nearly every reading is.
            self.mark = time
            self.last = sequence
            ahead_of = self.ahead_of
            ahead_of.append(last)
            if len(ahead_of) >= UNSETTLED:
                self._settle()
            return Verdict.NEW
        self._settle()
        if last is None:
            verdict = Verdict.NEW
            distance = WINDOW
            if timed and time < max(mark, self.closed):
                return Verdict.LATE
        else:
            distance = ahead(sequence, last, self._wraps)
            verdict = Verdict.NEW if distance >= 0 else Verdict.RESTART
            if timed:
                if time <= mark:
                    if self._has(distance):
                        return Verdict.REPEATED
                    if time < mark:
                        return Verdict.LATE
                    # Equal time, new number: accepted, also where it fills a hole.
                    verdict = Verdict.NEW
                if time < self.closed:
                    return Verdict.LATE
            elif self._has(distance):
                return Verdict.REPEATED
            elif -WINDOW < distance < 0:
                return Verdict.LATE
        self.mark = time
        if verdict is Verdict.RESTART or not -WINDOW < distance < WINDOW:
            # Out of the window's reach, whichever way: the window goes there.
            self.last, self._bits = sequence, 1
        elif distance >= 0:
            self.last = sequence
            self._bits = (self._bits << distance | 1) & _MASK
        else:
            self._bits |= 1 << -distance
        return verdict

    def _admit_by_time(self, time: int) -> Verdict:
        if self._times is None:
            self._times = deque(maxlen=_RECENT_TIMES)
        if time <= self.mark:
            # A message that lacks its number has only its time to be known by.
            known = time == self.mark or time in self._times
            return Verdict.REPEATED if known else Verdict.LATE
        if time < self.closed:
            return Verdict.LATE
        self._times.append(time)
        return self._advance(time)

    def _advance(self, time: int) -> Verdict:
        self.place = self.place + 1 if time == self.mark else 0
        self.mark = time
        return Verdict.NEW

    def close(self, before: int) -> None:
        """What was gathered is done with: readings from before this event time are late now."""
        self.closed = before

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        self._settle()
        times = None if self._times is None else list(self._times)
        return [self.mark, self.closed, self.last, hex(self._bits), times, self.place]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        self.mark, self.closed, self.last, bits, times, self.place = state
        self._bits = int(bits, 16)
        self._times = None if times is None else deque(times, maxlen=_RECENT_TIMES)

    def _settle(self) -> None:
        """Move the window of bits to the newest number, which it may lag behind by a few."""
        if not self.ahead_of or self.last is None:
            return
        oldest = self.ahead_of[0]
        bits = self._bits << (self.last - oldest) | 1
        for number in self.ahead_of:
            bits |= 1 << (self.last - number)
        self._bits = bits & _MASK
        self.ahead_of.clear()

    def _has(self, distance: int) -> bool:
        return -WINDOW < distance <= 0 and bool(self._bits >> -distance & 1)


_MASK = (1 << WINDOW) - 1


class TopicCounter:
    """The sequence counter of one concrete topic, which its streams may share: counts what is
    missing.

    A number whose message was set aside was not lost on the way, so it does not count as missing.
    """

    __slots__ = ("_wraps", "last", "noted")

    def __init__(self, wraps: int | None) -> None:
        self._wraps = wraps
        self.last: int | None = None
        self.noted: set[int] = set()

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        return [self.last, sorted(self.noted)]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        self.last, noted = state
        self.noted = set(noted)

    def note(self, sequence: int) -> None:
        """A message with this number came, and was set aside."""
        if self.last is not None and 0 < ahead(sequence, self.last, self._wraps) <= WINDOW:
            self.noted.add(sequence)

    def advance(self, sequence: int, restarted: bool) -> int:
        """A reading with this number was accepted; how many numbers the gap before it lost.

        ``restarted``: its stream saw the counter fall. Where another stream saw that first, the
        number is ahead already and its gap counts like any other.
        """
        last = self.last
        if last is not None and sequence - last == 1 and not self.noted:
            self.last = sequence
            return 0
        distance = 0 if last is None else ahead(sequence, last, self._wraps)
        if last is None or (restarted and distance < 0):
            self.last = sequence
            self.noted.clear()
            return 0
        if distance <= 0:
            return 0
        self.last = sequence
        if not self.noted:
            return distance - 1
        passed = {n for n in self.noted if ahead(n, sequence, self._wraps) <= 0}
        self.noted -= passed
        return distance - 1 - len(passed - {sequence})
