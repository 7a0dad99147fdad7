"""Readings of one stream, gathered into rational subgroups.

Knows counting and gaps. Must not know detectors, topics or limits.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from monitor.plan import SubgroupPlan

Identity = tuple[int | None, int | None, int | None, int | None]
"""(sequence, event time, arrival, place) of a reading; None for what it is not known by."""


@dataclass(slots=True)
class Subgroup:
    """One finished subgroup of a stream; treated as frozen once it is made (one is made for every
    few readings, and a frozen dataclass costs three times as much to make).

    ``first`` and ``last`` are event times (µs), ``identity`` is that of the last reading,
    ``broken`` is true where a gap lies between this subgroup and the stream's reading before it.
    """

    number: int
    values: tuple[float, ...]
    first: int
    last: int
    identity: Identity
    broken: bool
    size: int
    mean: float

    @property
    def range(self) -> float | None:
        """Largest less smallest value; None for a single value."""
        return max(self.values) - min(self.values) if self.size > 1 else None

    @property
    def sd(self) -> float | None:
        """Sample standard deviation (divisor n − 1); None for a single value."""
        if self.size < 2:
            return None
        centre = self.mean
        return math.sqrt(sum((x - centre) * (x - centre) for x in self.values) / (self.size - 1))


class Gatherer:
    """Gathers one stream's readings: consecutive ones, ``size`` at a time."""

    __slots__ = ("_broken", "_first", "_last", "_plan", "_values", "abandoned", "number")

    def __init__(self, plan: SubgroupPlan) -> None:
        self._plan = plan
        self._values: list[float] = []
        self._first = 0
        self._last: int | None = None
        self._broken = False
        self.number = 0
        self.abandoned = 0

    def add(self, value: float, time: int, identity: Identity) -> Subgroup | None:
        """Take a reading at event time ``time``; the subgroup it completes, if any.

        A gap longer than ``max_gap`` since the reading before abandons what was gathered.
        """
        plan, last, values = self._plan, self._last, self._values
        if plan.max_gap is not None and last is not None and time - last > plan.max_gap:
            self.abandon()
            values = self._values
        self._last = time
        if not values:
            self._first = time
        values.append(value)
        size = len(values)
        if size < plan.size:
            return None
        self.number += 1
        self._values = []
        broken, self._broken = self._broken, False
        return Subgroup(
            self.number,
            tuple(values),
            self._first,
            time,
            identity,
            broken,
            size,
            sum(values) / size if size > 1 else value,
        )

    def abandon(self) -> None:
        """Drop what was gathered: what comes does not continue what was."""
        if self._values:
            self.abandoned += 1
            self._values = []
        self._broken = True
