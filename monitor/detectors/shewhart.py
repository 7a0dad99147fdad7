"""Shewhart charts (W. A. Shewhart 1931; ISO 7870-2): a statistic, its limits, its rules.

Knows one chart and the rules on it. Must not know streams or alerts.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from typing import Any

from monitor.detectors.base import NO_SIGNALS, Signal, met
from monitor.detectors.charts import SPREAD, chart
from monitor.detectors.rules import rule, span
from monitor.methods.limits import Limits
from monitor.outputs import Row
from monitor.plan import BaselinePlan, Direction, ShewhartPlan
from monitor.subgroups import Subgroup

_SIDES: dict[str, Direction] = {
    "outside-upper": "up",
    "zone-upper": "up",
    "run-upper": "up",
    "trend-up": "up",
    "outside-lower": "down",
    "zone-lower": "down",
    "run-lower": "down",
    "trend-down": "down",
}


@lru_cache(maxsize=1024)
def _limits(
    plan: ShewhartPlan, baseline: BaselinePlan, size: int
) -> tuple[tuple[Limits, ...], Limits, float]:
    """Each rule's limits, the chart's own, and the standard error, for subgroups of ``size``:
    shared by the streams of one baseline."""
    judged = chart(plan.chart, baseline, plan.exact)
    rules = tuple(judged.limits(size, each.width) for each in plan.rules)
    return rules, judged.limits(size, plan.width), judged.error(size)


class Shewhart:
    """One Shewhart chart of one stream."""

    __slots__ = (
        "_at",
        "_baseline",
        "_chart",
        "_limits",
        "_plain",
        "_plan",
        "_rules",
        "_se",
        "_size",
        "_spread",
        "_value",
    )

    def __init__(self, plan: ShewhartPlan, baseline: BaselinePlan) -> None:
        self._plan = plan
        self._baseline = baseline
        self._chart = chart(plan.chart, baseline, plan.exact)
        self._spread = plan.chart in SPREAD
        self._plain = [each.rule for each in plan.rules] == ["outside"]
        self._rules = tuple(rule(r) for r in plan.rules)
        self._size = 0
        self._limits: tuple[Limits, ...] = ()
        self._at = Limits(0.0, 0.0, 0.0)
        self._se = 1.0
        self._value: float | None = None

    def step(self, subgroup: Subgroup) -> tuple[Signal, ...]:
        """Hold the subgroup's statistic against every rule."""
        value = self._value = self._chart.value(subgroup)
        if value is None:
            return NO_SIGNALS
        if subgroup.size != self._size:
            self._resize(subgroup.size)
        if self._plain:
            # Only the rule ``outside``, and the point inside: nothing is met, nothing remembered.
            at = self._limits[0]
            if at.lower <= value <= at.upper:
                return NO_SIGNALS
        z = (value - self._at.centre) / self._se
        signals = NO_SIGNALS
        for index, decide in enumerate(self._rules):
            for name in decide.step(value, z, self._limits[index]):
                # Two of one name may be met (2 of 3 and 4 of 5): the one declared first tells.
                if not any(signal.rule == name for signal in signals):
                    signals += self._signal(name, index, value)
        return signals

    def _signal(self, name: str, index: int, value: float) -> tuple[Signal, ...]:
        side = _SIDES.get(name)
        if side and self._plan.direction not in ("both", side):
            return NO_SIGNALS
        planned = self._plan.rules[index]
        limits = self._limits[index] if planned.width else self._at
        direction = None if self._spread else side
        return (
            Signal(
                name,
                direction,
                self._plan.chart,
                value,
                limits.lower,
                limits.upper,
                span(planned),
                planned.count,
            ),
        )

    def _resize(self, size: int) -> None:
        self._size = size
        self._limits, self._at, self._se = _limits(self._plan, self._baseline, size)

    def rows(self, name: str, signals: tuple[Signal, ...]) -> tuple[Row, ...]:
        """One row; none where the point is blank."""
        value, at, statistic = self._value, self._at, self._plan.chart
        if value is None:
            return ()
        rules = met(signals, statistic)
        return (Row(name, statistic, statistic, value, at.centre, at.lower, at.upper, rules),)

    def state(self) -> list[Any]:
        """The chart's and every rule's."""
        return [self._chart.state(), [each.state() for each in self._rules]]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        chart, rules = state
        self._chart.restore(chart)
        for each, remembered in zip(self._rules, rules, strict=True):
            each.restore(remembered)

    def restart(self) -> None:
        """Fresh rules: no pattern reaches across."""
        self._chart.restart()
        self._rules = tuple(rule(r) for r in self._plan.rules)
        self._value = None
