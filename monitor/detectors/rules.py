"""The decision rules of a Shewhart chart, one small object each.

Knows one point after another. Must not know charts, units or other rules.

Every rule takes every point, with the limits at the rule's own width. Pattern rules start afresh
after they signal, so that two signals share no point.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Sequence
from typing import Any, Protocol

from monitor.memory import Remembers
from monitor.methods.limits import Limits
from monitor.plan import RulePlan

Met = tuple[str, ...]
"""The names of what was met: ``outside-upper``, ``trend-down``, ``mixture`` …"""

NONE: Met = ()


class Rule(Protocol):
    """One rule, fed with every point."""

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Take a point: ``limits`` are at the rule's own width, ``z`` is its standardised value."""

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""


def _side(value: float, limits: Limits) -> int:
    if value > limits.upper:
        return 1
    return -1 if value < limits.lower else 0


class Outside(Remembers):
    """One point beyond the limits; signals at each such point."""

    __slots__ = ()

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met on the side the point fell."""
        if value > limits.upper:
            return ("outside-upper",)
        return ("outside-lower",) if value < limits.lower else NONE


class Zone(Remembers):
    """``count`` of the last ``of`` points beyond, on one side, the newest among them."""

    __slots__ = ("_count", "_sides")

    def __init__(self, count: int, of: int) -> None:
        self._count = count
        self._sides: deque[int] = deque(maxlen=of)

    def state(self) -> list[Any]:
        """The sides of the last points."""
        return list(self._sides)

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        self._sides.extend(state)

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met also while fewer than ``of`` points exist."""
        side = _side(value, limits)
        self._sides.append(side)
        if side and self._sides.count(side) >= self._count:
            return ("zone-upper",) if side > 0 else ("zone-lower",)
        return NONE


class Run(Remembers):
    """``length`` points in a row on one side of the centre; a point on the centre ends the run."""

    __slots__ = ("_length", "_run", "_side")
    _memory = ("_side", "_run")

    def __init__(self, length: int) -> None:
        self._length = length
        self._side = self._run = 0

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met at the last point of the run."""
        side = (value > limits.centre) - (value < limits.centre)
        self._run = self._run + 1 if side and side == self._side else abs(side)
        self._side = side
        if self._run < self._length:
            return NONE
        self._side = self._run = 0
        return ("run-upper",) if side > 0 else ("run-lower",)


class _Steps(Remembers):
    """``length`` points in a row, each step as the one before or each the other way."""

    __slots__ = ("_length", "_points", "_previous", "_side")
    _memory = ("_points", "_side", "_previous")

    def __init__(self, length: int) -> None:
        self._length = length
        self._points = self._side = 0
        self._previous: float | None = None

    def _completed(self, value: float, turn: int) -> int:
        """Take a point: the side of its step where that completes the row, else 0.

        ``turn`` is 1 where steps go on the same way, −1 where they alternate; equal neighbours end
        the row.
        """
        before = self._previous
        side = 0 if before is None else (value > before) - (value < before)
        self._points = self._points + 1 if side and side == turn * self._side else 1 + abs(side)
        self._side, self._previous = side, value
        if self._points < self._length:
            return 0
        self._points = self._side = 0
        self._previous = None
        return side


class Trend(_Steps):
    """``length`` points in a row steadily rising or falling; equal neighbours end it."""

    __slots__ = ()

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met at the last point of the trend; judged on the values themselves."""
        side = self._completed(value, 1)
        if not side:
            return NONE
        return ("trend-up",) if side > 0 else ("trend-down",)


class Alternation(_Steps):
    """``length`` points in a row alternating up and down; equal neighbours end it."""

    __slots__ = ()

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met at the last point; judged on standardised values."""
        return ("alternation",) if self._completed(z, -1) else NONE


class _Streak(Remembers):
    """``length`` points in a row of one kind, on whichever side."""

    __slots__ = ("_length", "_run")
    _memory = ("_run",)

    def __init__(self, length: int) -> None:
        self._length = length
        self._run = 0

    def _completed(self, is_one: bool) -> bool:
        """Take a point: whether it completes the row."""
        self._run = self._run + 1 if is_one else 0
        if self._run < self._length:
            return False
        self._run = 0
        return True


class Stratification(_Streak):
    """``length`` points in a row inside the limits: they spread less than the baseline says."""

    __slots__ = ()

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met at the last point of the run."""
        inside = limits.lower < value < limits.upper
        return ("stratification",) if self._completed(inside) else NONE


class Mixture(_Streak):
    """``length`` points in a row outside the limits, on either side."""

    __slots__ = ()

    def step(self, value: float, z: float, limits: Limits) -> Met:
        """Met at the last point of the run."""
        return ("mixture",) if self._completed(bool(_side(value, limits))) else NONE


def rule(plan: RulePlan) -> Rule:
    """A fresh rule as planned."""
    match plan.rule:
        case "outside":
            return Outside()
        case "zone":
            return Zone(plan.count, plan.of)
        case "run":
            return Run(plan.length)
        case "trend":
            return Trend(plan.length)
        case "alternation":
            return Alternation(plan.length)
        case "stratification":
            return Stratification(plan.length)
        case "mixture":
            return Mixture(plan.length)


def span(plan: RulePlan) -> int:
    """How many points the rule looks at."""
    return plan.length or plan.of or 1
