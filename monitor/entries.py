"""The typed journal entries: everything that can move the engine's state, and nothing else.

Knows plain frozen data. Must not know where entries are kept or come from: the journal, exports and
recordings share these types, and the engine takes no other input.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from monitor.plan import Plan


@dataclass(slots=True)
class Message:
    """One MQTT message; ``time`` is its arrival, microseconds since 1970-01-01T00:00Z.

    Never changed once it is made. Not declared so, since one is made for every reading and a frozen
    one takes four times as long to make. ``packet`` is the broker's identifier, by which a message
    sent again is recognised; it moves nothing in the engine.
    """

    time: int
    topic: str
    payload: bytes
    retain: bool = False
    qos: int = 1
    packet: int = 0


@dataclass(slots=True)
class Parsed:
    """A message that a recording's line held as JSON, parsed with the line.

    The same as a ``Message`` whose payload is the document's text. Never changed once it is made.
    """

    time: int
    topic: str
    document: object


@dataclass(frozen=True, slots=True)
class Reading:
    """A row of a table: what a message would have said, already taken apart.

    ``value`` may be anything the table held; the engine judges it as it judges a message's. ``at``
    is the event time (ISO 8601 text or epoch number), None where the row has none. ``stream`` holds
    the raw stream columns.
    """

    time: int
    characteristic: str
    stream: Mapping[str, str]
    value: object
    at: object = None
    sequence: object = None


@dataclass(frozen=True, slots=True)
class Started:
    """The daemon began (or a recording says one did)."""

    time: int


@dataclass(frozen=True, slots=True)
class Connected:
    """Subscribed at the broker; ``session_present`` is what the broker said of our session."""

    time: int
    session_present: bool


@dataclass(frozen=True, slots=True)
class Disconnected:
    """The connection ended; until the next ``Connected`` nothing can be judged."""

    time: int


@dataclass(frozen=True, slots=True)
class Tick:
    """Time passed: what was due by then was done, though no message came."""

    time: int


@dataclass(frozen=True, slots=True)
class Configured:
    """From here on ``plan`` is in force."""

    time: int
    plan: Plan


@dataclass(frozen=True, slots=True)
class State:
    """What an engine remembered under ``plan`` once it had folded all that came up to ``time``.

    No entry, as it does not move an engine but makes one: with it begins a recording that is only a
    part of what was folded. ``engine`` and ``streams`` are what ``Engine.restore`` takes.
    """

    time: int
    plan: Plan
    engine: dict[str, Any]
    streams: tuple[dict[str, Any], ...]


Recorded = Message | Started | Connected | Disconnected | Tick | Configured
"""What a journal holds; a table's ``Reading`` was never a message."""

Entry = Recorded | Parsed | Reading
