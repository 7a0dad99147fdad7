"""What came in since the last commit: arrival stamps, the batch, what to acknowledge for it.

Knows messages and how arrival is reckoned. Must not know sockets, files or what messages mean.
"""

from __future__ import annotations

import math
from collections.abc import Callable

from monitor.entries import Connected, Message, Recorded
from monitor.resends import Resends
from monitor.times import SECOND

NANOSECONDS = 1_000
_MOST = 2_000
_MOST_BYTES = 8 << 20
_PATIENCE = 2 * SECOND
"""How long nothing comes from a broker that waits, or has nothing more to send again."""
_LONGEST = 60 * SECOND
"""How long after a reconnect something may be sent again, however much is new on other topics."""


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

    __slots__ = (
        "_acknowledge",
        "_bytes",
        "_came",
        "_connected",
        "_entries",
        "_heard",
        "_now",
        "_resends",
        "holding",
        "unsafe",
    )

    def __init__(self, now: Callable[[], int], resends: Resends) -> None:
        self._now = now
        self._resends = resends
        self._entries: list[Recorded] = []
        self._acknowledge: list[int] = []
        self._came: list[tuple[Message, bool]] = []
        self._bytes = 0
        self._connected = self._heard = math.inf
        self.holding = False
        """Whether it takes more messages, or quiet, to tell what is new of those that came."""
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
                self._heard = message.time
        elif not retain:
            self.unsafe += 1

    def note(self, entry: Recorded) -> None:
        """Something else happened that moves state."""
        self._entries.append(entry)
        if isinstance(entry, Connected):
            self._connected = self._heard = entry.time

    def full(self) -> bool:
        """Whether the batch is large enough: brokers differ in whether they bound it."""
        return len(self._entries) >= _MOST or self._bytes >= _MOST_BYTES

    def take(self) -> tuple[list[Recorded], list[int]]:
        """The batch and its acknowledgements; both start again empty.

        What was journaled before is only acknowledged. While ``holding``, what follows the first
        message of which that cannot be told yet is left for later.
        """
        entries, acknowledge, came = self._entries, self._acknowledge, self._came
        again, told = self._sent_again() if self._resends.matching else ([], len(came))
        self.holding = told < len(came)
        self._entries, self._acknowledge, self._came = [], [], came[told:]
        if self.holding:
            first = came[told][0]
            at = next(n for n, each in enumerate(entries) if each is first)
            entries, self._entries = entries[:at], entries[at:]
            acknowledge, self._acknowledge = acknowledge[:told], acknowledge[told:]
        self._weigh()
        if again:
            known = {id(message) for message in again}
            entries = [each for each in entries if id(each) not in known]
        return entries, acknowledge

    def connection_lost(self) -> None:
        """A batch dies with its connection: the broker sends again what it has no word about."""
        self._acknowledge.clear()
        self._came.clear()
        self._entries = [e for e in self._entries if not (isinstance(e, Message) and e.qos)]
        self._weigh()
        self._connected = self._heard = math.inf
        self.holding = False

    def _weigh(self) -> None:
        self._bytes = sum(len(e.payload) for e in self._entries if isinstance(e, Message))

    def _sent_again(self) -> tuple[list[Message], int]:
        resends, came, now = self._resends, self._came, self._now()
        quiet, late = now - self._heard >= _PATIENCE, now - self._connected >= _LONGEST
        told = resends.again(came, final=quiet or late or self.full())
        if late or (quiet and not came):
            resends.nothing_more()
        return told
