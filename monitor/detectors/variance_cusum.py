"""CUSUM of subgroup variances (D. M. Hawkins & D. H. Olwell 1998): the spread, not the mean.

Knows two sums, and what was summed since each last was 0. Must not know streams or alerts.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any, Literal

from monitor.detectors.base import NO_SIGNALS, Signal, met
from monitor.memory import Remembers
from monitor.outputs import Row
from monitor.plan import BaselinePlan, CusumPlan
from monitor.subgroups import Subgroup

_MOST = 1e100
"""Of a subgroup's variance, in the baseline's: beyond, sums would not stay numbers."""


_SIDES = {"upper_sum": ("cusum-upper", 1.0), "lower_sum": ("cusum-lower", -1.0)}


class _Sum(Remembers):
    """One side's sum, in multiples of the baseline's variance."""

    __slots__ = (
        "_onset",
        "_points",
        "_sign",
        "_squares",
        "_start",
        "_weight",
        "h",
        "hold",
        "k",
        "rule",
        "shown",
        "statistic",
        "value",
    )
    _memory = ("value", "_points", "_weight", "_squares", "_onset")

    def __init__(
        self,
        statistic: Literal["upper_sum", "lower_sum"],
        k: float,
        h: float,
        head_start: float,
        hold: bool,
    ) -> None:
        self.statistic = statistic
        self.rule, self._sign = _SIDES[statistic]
        self.k, self.h, self.hold = k, h, hold
        self._start = head_start * h
        self.shown = 0.0
        self.restart()

    def restart(self) -> None:
        """The sum at its head start, and nothing in it."""
        self.value = self._start
        self._points, self._weight, self._squares, self._onset = 0, 0.0, 0.0, 0

    def add(self, square: float, weight: float, first: int) -> bool:
        """Take a variance with its weight, from readings since ``first``; whether it signals."""
        value = self.value + self._sign * weight * (square - self.k)
        if value > 0.0:
            if not self._weight:
                self._onset = first
            self._points += 1
            self._weight += weight
            self._squares += weight * square
        else:
            value, self._points, self._weight, self._squares = 0.0, 0, 0.0, 0.0
        self.value = self.shown = value
        if value <= self.h:
            return False
        if not self.hold:
            self.value = self._start
        return True

    def signal(self, unit: float) -> Signal:
        """What is told of the sum that has just signalled, its figures in multiples of ``unit``.

        The spread began to differ after the last zero (E. S. Page 1954), which for the spread that
        k is for is the likeliest onset. The rule looked at the points since then, or since it last
        signalled.
        """
        points, self._points = self._points, 0
        return Signal(
            self.rule,
            None,
            self.statistic,
            self.shown * unit,
            None,
            self.h * unit,
            points,
            ratio=math.sqrt(self._squares / self._weight),
            onset=self._onset,
        )


class VarianceCusum:
    """The sums of one stream: kept in multiples of the baseline's variance, shown in the
    characteristic's unit squared."""

    __slots__ = ("_blank", "_planned", "_sigma", "_sums", "_unit")

    def __init__(self, plan: CusumPlan, baseline: BaselinePlan) -> None:
        self._sigma = baseline.sigma
        self._unit = baseline.sigma * baseline.sigma
        self._planned = None if plan.size is None else plan.size - 1
        self._sums = tuple(
            _Sum(statistic, k, h, plan.head_start, plan.hold) for statistic, k, h in plan.sums()
        )
        self._blank = True

    def step(self, subgroup: Subgroup) -> tuple[Signal, ...]:
        """Add the subgroup's variance to each sum; one above its ``h`` signals and restarts."""
        variance = subgroup.variance
        self._blank = variance is None
        if variance is None:
            return NO_SIGNALS
        square = min(variance / self._sigma / self._sigma, _MOST)
        freedom = subgroup.size - 1
        # What a subgroup tells of the spread grows with its degrees of freedom.
        weight = 1.0 if self._planned is None else freedom / self._planned
        signals = NO_SIGNALS
        for each in self._sums:
            if each.add(square, weight, subgroup.first):
                signals += (each.signal(self._unit),)
        return signals

    def rows(self, name: str, signals: tuple[Signal, ...]) -> tuple[Row, ...]:
        """The sums as they were compared, before any restart."""
        if self._blank:
            return ()
        unit = self._unit
        return tuple(
            Row(
                name,
                "variance",
                each.statistic,
                each.shown * unit,
                0.0,
                None,
                each.h * unit,
                met(signals, each.statistic),
            )
            for each in self._sums
        )

    def restart(self) -> None:
        """Both sums at the head start."""
        self._blank = True
        for each in self._sums:
            each.restart()

    def state(self) -> list[Any]:
        """Each sum's."""
        return [each.state() for each in self._sums]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        for each, remembered in zip(self._sums, state, strict=True):
            each.restore(remembered)
