"""What the engine gives out for an entry.

Knows plain data. Must not know topics, JSON or who will read it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

from monitor.messages import AlertEvent
from monitor.plan import CharacteristicPlan, Stream
from monitor.subgroups import Subgroup


class Evidence(NamedTuple):
    """The last subgroups of a stream: event time of the first reading, standardised mean, size."""

    first: tuple[int, ...] = ()
    z: tuple[float, ...] = ()
    size: tuple[int, ...] = ()


class Row(NamedTuple):
    """One statistic of one detector at one subgroup, in the characteristic's unit."""

    detector: str
    chart: str
    statistic: str
    value: float
    centre: float
    lower: float | None
    upper: float | None
    rules: tuple[str, ...]


class Points(NamedTuple):
    """All rows of one subgroup, in the order of the detectors."""

    characteristic: CharacteristicPlan
    stream: Stream
    subgroup: Subgroup
    rows: tuple[Row, ...]


@dataclass(frozen=True, slots=True)
class Alert:
    """One alert event of one stream, and what the stream looked back on when it was decided."""

    characteristic: CharacteristicPlan
    stream: Stream
    event: AlertEvent
    evidence: Evidence


@dataclass(frozen=True, slots=True)
class SetAside:
    """A message or reading that was not used; ``characteristic`` is None where none was found."""

    reason: str
    characteristic: str | None
    time: int
    topic: str
    payload: bytes


@dataclass(frozen=True, slots=True)
class Gone:
    """A stream left the configuration; ``proposed``: a baseline had been proposed for it."""

    characteristic: str
    stream: Stream
    proposed: bool = False


Output = Points | Alert | SetAside | Gone
