"""What came in since the last commit: arrival stamps, the batch, what to acknowledge for it.

Knows messages and how arrival is reckoned. Must not know sockets, files or what messages mean.
"""

from __future__ import annotations

import math
from collections.abc import Callable

from monitor.entries import Message, Recorded
from monitor.resends import Resends
from monitor.times import SECOND

NANOSECONDS = 1_000
_MOST = 2_000
_MOST_BYTES = 8 << 20


class Arrival:
    """Stamps arrivals in microseconds: the wall clock once, then only the monotonic clock.

    So a step of the host's clock moves no arrival, and none runs backwards: not even across a
    restart, if ``not_before`` is the journal's last. ``wall`` and ``monotonic`` give nanoseconds.
    """

    __slots__ = ("_ahead", "_monotonic")

    def __init__(
        self, wall: Callable[[], int], monotonic: Callable[[], int], not_before: int
    ) -> None:
        self._monotonic = monotonic
        self._ahead = max(wall(), not_before * NANOSECONDS) - monotonic()

    def now(self) -> int:
        """The arrival of what arrives now."""
        return (self._monotonic() + self._ahead) // NANOSECONDS

    def until(self, time: int | None) -> float:
        """Seconds until ``time`` has come, 0 once it has; for ever where it is None."""
        return math.inf if time is None else max(0, time - self.now()) / SECOND


class Intake:
    """Entries in order, and the acknowledgements that their commit will allow."""

    __slots__ = ("_acknowledge", "_bytes", "_came", "_entries", "_now", "_resends", "unsafe")

    def __init__(self, now: Callable[[], int], resends: Resends) -> None:
        self._now = now
        self._resends = resends
        self._entries: list[Recorded] = []
        self._acknowledge: list[int] = []
        self._came: list[tuple[Message, bool]] = []
        self._bytes = 0
        self.unsafe = 0
        """Messages that came at QoS 0: no broker keeps those for us."""

    def message(
        self, topic: str, payload: bytes, retain: bool, qos: int, packet: int, dup: bool
    ) -> None:
        """A message arrived; ``packet`` is its identifier where it wants an acknowledgement."""
        message = Message(self._now(), topic, payload, retain, qos, packet)
        self._entries.append(message)
        self._bytes += len(payload)
        if qos:
            self._acknowledge.append(packet)
            if self._resends.matching:
                self._came.append((message, dup))
        elif not retain:
            self.unsafe += 1

    def note(self, entry: Recorded) -> None:
        """Something else happened that moves state."""
        self._entries.append(entry)

    def full(self) -> bool:
        """Whether the batch is large enough: brokers differ in whether they bound it."""
        return len(self._entries) >= _MOST or self._bytes >= _MOST_BYTES

    def take(self) -> tuple[list[Recorded], list[int]]:
        """The batch and its acknowledgements; both start again empty.

        What was journaled before is only acknowledged.
        """
        entries, acknowledge, came = self._entries, self._acknowledge, self._came
        self._entries, self._acknowledge, self._came, self._bytes = [], [], [], 0
        if came:
            again = {id(message) for message, _ in came[: self._resends.again(came)]}
            entries = [each for each in entries if id(each) not in again]
        return entries, acknowledge

    def connection_lost(self) -> None:
        """A batch dies with its connection: the broker sends again what it has no word about."""
        self._acknowledge.clear()
        self._came.clear()
        self._entries = [e for e in self._entries if not (isinstance(e, Message) and e.qos)]
