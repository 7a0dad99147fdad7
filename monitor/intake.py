"""What came in since the last commit: arrival stamps, the batch, what to acknowledge for it.

Knows messages and how arrival is reckoned. Must not know sockets, files or what messages mean.
"""

from __future__ import annotations

from collections.abc import Callable

from monitor.entries import Entry, Message

NANOSECONDS = 1_000


class Arrival:
    """Stamps arrivals in microseconds: the wall clock once, then only the monotonic clock.

    So a step of the host's clock moves no arrival, and none runs backwards: not even across a restart,
    if ``not_before`` is the journal's last. ``wall`` and ``monotonic`` give nanoseconds.
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


class Intake:
    """Entries in order, and the acknowledgements that their commit will allow."""

    __slots__ = ("_now", "acknowledge", "entries", "unsafe")

    def __init__(self, now: Callable[[], int]) -> None:
        self._now = now
        self.entries: list[Entry] = []
        self.acknowledge: list[int] = []
        self.unsafe = 0
        """Messages that came at QoS 0: no broker keeps those for us."""

    def message(self, topic: str, payload: bytes, retain: bool, qos: int, packet: int) -> None:
        """A message arrived; ``packet`` is its identifier where it wants an acknowledgement."""
        self.entries.append(Message(self._now(), topic, payload, retain, qos))
        if qos:
            self.acknowledge.append(packet)
        elif not retain:
            self.unsafe += 1

    def note(self, entry: Entry) -> None:
        """Something else happened that moves state."""
        self.entries.append(entry)

    def take(self) -> tuple[list[Entry], list[int]]:
        """The batch and its acknowledgements; both start again empty."""
        taken = self.entries, self.acknowledge
        self.entries, self.acknowledge = [], []
        return taken

    def connection_lost(self) -> None:
        """A batch dies with its connection: the broker will send again what it has no word about."""
        self.acknowledge.clear()
        self.entries = [e for e in self.entries if not (isinstance(e, Message) and e.qos)]
