"""Alerts between the journal and the broker: in order, until each is acknowledged.

Knows places in the journal's outbox and packet identifiers. Must not know sockets or files.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator
from typing import NamedTuple


class Waiting(NamedTuple):
    """An alert that no broker has acknowledged yet."""

    place: int
    topic: str
    payload: bytes


class Outbox:
    """What is to be sent, and what was sent and is not acknowledged."""

    __slots__ = ("_sent", "_unsent")

    def __init__(self, waiting: Iterable[tuple[int, str, bytes]] = ()) -> None:
        self._unsent: deque[Waiting] = deque()
        self._sent: dict[int, Waiting] = {}
        self.extend(waiting)

    def __len__(self) -> int:
        return len(self._unsent) + len(self._sent)

    def extend(self, waiting: Iterable[tuple[int, str, bytes]]) -> None:
        """(place, topic, payload) of alerts that are durable now."""
        self._unsent.extend(Waiting(*each) for each in waiting)

    def to_send(self, in_flight: int) -> Iterator[Waiting]:
        """Alerts to send now, oldest first, while fewer than ``in_flight`` are unacknowledged.

        Call ``sent`` for each before taking the next.
        """
        while self._unsent and len(self._sent) < in_flight:
            yield self._unsent[0]

    def sent(self, packet: int) -> None:
        """The oldest unsent alert left under this packet identifier."""
        self._sent[packet] = self._unsent.popleft()

    def acknowledged(self, packet: int) -> int | None:
        """The place of the alert the broker took over, or None where the packet was no alert."""
        waiting = self._sent.pop(packet, None)
        return None if waiting is None else waiting.place

    def connection_lost(self) -> None:
        """What was not acknowledged is to be sent again, in its old order."""
        self._unsent.extendleft(reversed(self._sent.values()))
        self._sent.clear()
