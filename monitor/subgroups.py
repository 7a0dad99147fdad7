"""Readings of one stream, gathered into rational subgroups.

Knows counting and gaps. Must not know detectors, topics or limits.
"""

from __future__ import annotations

import math
import statistics
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

from monitor.memory import Remembers
from monitor.plan import ByCount, ByWindow, SubgroupPlan

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

    def state(self) -> list[Any]:
        """As JSON values."""
        return [
            self.number,
            self.values,
            self.first,
            self.last,
            self.identity,
            self.broken,
            self.size,
            self.mean,
        ]

    @classmethod
    def restored(cls, state: Sequence[Any]) -> Subgroup:
        """From what ``state`` gave."""
        number, values, first, last, identity, *rest = state
        return cls(number, tuple(values), first, last, tuple(identity), *rest)

    @property
    def range(self) -> float | None:
        """Largest less smallest value; None for a single value."""
        return max(self.values) - min(self.values) if self.size > 1 else None

    @property
    def median(self) -> float:
        """Middle value, or the mean of the two in the middle."""
        return statistics.median(self.values)

    @property
    def variance(self) -> float | None:
        """Sample variance (divisor n − 1); None for a single value."""
        if self.size < 2:
            return None
        centre = self.mean
        return sum((x - centre) * (x - centre) for x in self.values) / (self.size - 1)

    @property
    def sd(self) -> float | None:
        """Sample standard deviation, the square root of the variance."""
        variance = self.variance
        return None if variance is None else math.sqrt(variance)


class Gatherer(Protocol):
    """Gathers one stream's readings into subgroups, and tells ``given_up`` of unfinished ones."""

    number: int

    def add(self, value: float, time: int, identity: Identity) -> Subgroup | None:
        """Take a reading at event time ``time``; the subgroup that it ends, if any."""

    def closes(self) -> int | None:
        """The event time at which what is gathered ends without a further reading; None: never."""

    def close(self) -> Subgroup | None:
        """End what is gathered, since its time has come; the subgroup it makes, if any."""

    def abandon(self) -> None:
        """Drop what was gathered: what comes does not continue what was."""

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""


class CountGatherer(Remembers):
    """Consecutive readings, ``size`` at a time; with ``every``, so far apart."""

    __slots__ = (
        "_broken",
        "_first",
        "_given_up",
        "_started",
        "last",
        "number",
        "plan",
        "values",
    )
    _memory = ("values", "_first", "last", "_started", "_broken", "number")

    def __init__(self, plan: ByCount, given_up: Callable[[], None]) -> None:
        self.plan = plan
        self._given_up = given_up
        self.values: list[float] = []
        self._first = 0
        self.last: int | None = None
        self._started: int | None = None
        self._broken = False
        self.number = 0

    def add(self, value: float, time: int, identity: Identity) -> Subgroup | None:
        """A gap longer than ``max_gap`` since the reading before abandons what was gathered. With
        ``every``, a subgroup starts at the first reading that long after the last one started."""
        plan, last, values = self.plan, self.last, self.values
        if plan.max_gap is not None and last is not None and time - last > plan.max_gap:
            self.abandon()
            values = self.values
        self.last = time
        if not values:
            if plan.every is not None:
                if self._started is not None and time < self._started + plan.every:
                    return None
                self._started = time
            self._first = time
        values.append(value)
        if len(values) < plan.size:
            return None
        self.number += 1
        self.values = []
        broken, self._broken = self._broken, False
        return _subgroup(self.number, values, self._first, time, identity, broken)

    def closes(self) -> int | None:
        """Only readings end it."""
        return None

    def close(self) -> Subgroup | None:
        """Only readings end it."""
        return None

    def abandon(self) -> None:
        """Count what was gathered as abandoned."""
        if self.values:
            self._given_up()
            self.values = []
        self._broken = True


class WindowGatherer(Remembers):
    """The readings of each UTC-aligned window [start, start + window), ``min_size`` at least."""

    __slots__ = ("_first", "_given_up", "_identity", "_last", "_plan", "_values", "number")
    _memory = ("_values", "_first", "_last", "_identity", "number")

    def __init__(self, plan: ByWindow, given_up: Callable[[], None]) -> None:
        self._plan = plan
        self._given_up = given_up
        self._values: list[float] = []
        self._first = self._last = 0
        self._identity: Identity = (None, None, None, None)
        self.number = 0

    def add(self, value: float, time: int, identity: Identity) -> Subgroup | None:
        """A reading past the window's end closes it, and opens its own."""
        end = self.closes()
        done = self.close() if end is not None and time >= end else None
        if not self._values:
            self._first = time
        self._values.append(value)
        self._last, self._identity = time, identity
        return done

    def closes(self) -> int | None:
        """The end of the window, which belongs to the next."""
        if not self._values:
            return None
        return self._first - self._first % self._plan.window + self._plan.window

    def close(self) -> Subgroup | None:
        """Too few readings are abandoned."""
        values = self._values
        if len(values) < self._plan.min_size:
            self.abandon()
            return None
        self.number += 1
        self._values = []
        return _subgroup(self.number, values, self._first, self._last, self._identity, False)

    def abandon(self) -> None:
        """Count what was gathered as abandoned."""
        if self._values:
            self._given_up()
            self._values = []

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        *rest, identity, number = state
        super().restore([*rest, tuple(identity), number])


def gatherer(plan: SubgroupPlan, given_up: Callable[[], None]) -> Gatherer:
    """A fresh gatherer as planned; it calls ``given_up`` for each subgroup it abandons."""
    if isinstance(plan, ByCount):
        return CountGatherer(plan, given_up)
    return WindowGatherer(plan, given_up)


def _subgroup(
    number: int, values: list[float], first: int, last: int, identity: Identity, broken: bool
) -> Subgroup:
    size = len(values)
    mean = sum(values) / size if size > 1 else values[0]
    return Subgroup(number, tuple(values), first, last, identity, broken, size, mean)
