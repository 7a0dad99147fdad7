"""Journal entries as rows of a table, and back.

Knows kinds, columns and how a message's marks are packed. Must not know files or what entries mean.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator

from monitor import plan_json
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Message,
    Recorded,
    Started,
    Tick,
)

Row = tuple[int, int, int | None, bytes | None, int]
"""(time, kind, topic number, payload, flags)."""

MESSAGE, _STARTED, _CONNECTED, _DISCONNECTED, _TICK, _CONFIGURED = range(6)
_RETAINED = 4
_PACKET = 3  # bits that QoS and retained take; the packet identifier lies above


def rows(entries: Iterable[Recorded], number_of: Callable[[str], int]) -> Iterator[Row]:
    """Entries as rows; ``number_of`` gives the number of a topic."""
    for entry in entries:
        match entry:
            case Message(time, topic, payload, retain, qos, packet):
                flags = qos | (_RETAINED if retain else 0) | packet << _PACKET
                yield time, MESSAGE, number_of(topic), payload, flags
            case Started(time):
                yield time, _STARTED, None, None, 0
            case Connected(time, session_present):
                yield time, _CONNECTED, None, None, int(session_present)
            case Disconnected(time):
                yield time, _DISCONNECTED, None, None, 0
            case Tick(time):
                yield time, _TICK, None, None, 0
            case Configured(time, plan):
                yield time, _CONFIGURED, None, plan_json.encode(plan), 0


def entry(time: int, kind: int, topic: str | None, payload: bytes | None, flags: int) -> Recorded:
    """The entry of a row whose topic was looked up; ValueError where we wrote no such row."""
    if kind == MESSAGE and topic is not None and payload is not None:
        marks = flags & ((1 << _PACKET) - 1)
        return Message(
            time, topic, payload, marks >= _RETAINED, marks % _RETAINED, flags >> _PACKET
        )
    if kind == _STARTED:
        return Started(time)
    if kind == _CONNECTED:
        return Connected(time, bool(flags))
    if kind == _DISCONNECTED:
        return Disconnected(time)
    if kind == _TICK:
        return Tick(time)
    if kind == _CONFIGURED and payload is not None:
        return Configured(time, plan_json.decode(payload))
    raise ValueError(f"an entry of kind {kind}, which this version does not know")
