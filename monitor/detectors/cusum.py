"""Tabular CUSUM (E. S. Page 1954; ISO 7870-4), with head start (J. M. Lucas & R. B. Crosier 1982).

Knows two sums. Must not know streams or alerts.
"""

from __future__ import annotations

from monitor.detectors.base import NO_SIGNALS, Signal, met
from monitor.detectors.charts import standard_error
from monitor.memory import Remembers
from monitor.outputs import Row
from monitor.plan import BaselinePlan, CusumPlan
from monitor.subgroups import Subgroup


class Cusum(Remembers):
    """The two sums of one stream: kept in standard errors, shown in the characteristic's unit."""

    __slots__ = (
        "_baseline",
        "_down",
        "_lower",
        "_plan",
        "_se",
        "_shown",
        "_size",
        "_start",
        "_up",
        "_upper",
    )
    _memory = ("_upper", "_lower")

    def __init__(self, plan: CusumPlan, baseline: BaselinePlan) -> None:
        self._plan = plan
        self._baseline = baseline
        self._start = plan.head_start * plan.h
        self._up = plan.direction != "down"
        self._down = plan.direction != "up"
        self._size = 0
        self._se = 1.0
        self._upper = self._lower = self._start
        self._shown: tuple[float, float] | None = None

    def step(self, subgroup: Subgroup) -> tuple[Signal, ...]:
        """Add the standardised mean to both sums; one above ``h`` signals and goes to its start."""
        plan = self._plan
        if subgroup.size != self._size:
            self._size = subgroup.size
            self._se = standard_error(self._baseline, subgroup.size)
        z = (subgroup.mean - self._baseline.mean) / self._se
        clip = plan.clip
        if clip is not None:
            z = clip if z > clip else max(z, -clip)
        k, h = plan.k, plan.h
        upper = self._upper + z - k
        if upper < 0.0:
            upper = 0.0
        lower = self._lower - z - k
        if lower < 0.0:
            lower = 0.0
        self._upper, self._lower = upper, lower
        self._shown = (upper, lower)
        if upper <= h and lower <= h:
            return NO_SIGNALS
        signals = NO_SIGNALS
        se = self._se
        if self._up and upper > h:
            signals += (Signal("cusum-upper", "up", "upper_sum", upper * se, None, h * se),)
            if not plan.hold:
                self._upper = self._start
        if self._down and lower > h:
            signals += (Signal("cusum-lower", "down", "lower_sum", lower * se, None, h * se),)
            if not plan.hold:
                self._lower = self._start
        return signals

    def rows(self, name: str, signals: tuple[Signal, ...]) -> tuple[Row, ...]:
        """The sums as they were compared, before any restart."""
        if self._shown is None:
            return ()
        chart, se = self._plan.chart, self._se
        limit = self._plan.h * se
        upper, lower = self._shown
        rows = []
        if self._up:
            rules = met(signals, "upper_sum")
            rows.append(Row(name, chart, "upper_sum", upper * se, 0.0, None, limit, rules))
        if self._down:
            rules = met(signals, "lower_sum")
            rows.append(Row(name, chart, "lower_sum", lower * se, 0.0, None, limit, rules))
        return tuple(rows)

    def restart(self) -> None:
        """Both sums at the head start."""
        self._upper = self._lower = self._start
        self._shown = None
