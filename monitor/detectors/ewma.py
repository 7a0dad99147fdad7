"""EWMA (S. W. Roberts 1959; ISO 7870-6), its limits for the variance so far or in the long run.

Knows one average. Must not know streams or alerts.
"""

from __future__ import annotations

import math

from monitor.detectors.base import NO_SIGNALS, Signal, met
from monitor.detectors.charts import standard_error
from monitor.memory import Remembers
from monitor.outputs import Row
from monitor.plan import BaselinePlan, EwmaPlan
from monitor.subgroups import Subgroup


class Ewma(Remembers):
    """The average of one stream, in the characteristic's unit."""

    __slots__ = (
        "_average",
        "_baseline",
        "_centre",
        "_down",
        "_plan",
        "_reach",
        "_se",
        "_shown",
        "_size",
        "_up",
        "_variance",
    )
    _memory = ("_average", "_variance")

    def __init__(self, plan: EwmaPlan, baseline: BaselinePlan) -> None:
        self._plan = plan
        self._baseline = baseline
        self._centre = baseline.mean
        self._up = plan.direction != "down"
        self._down = plan.direction != "up"
        self._size = 0
        self._se = 1.0
        self._average = baseline.mean
        self._variance = 0.0
        self._reach = 0.0
        self._shown: float | None = None

    def step(self, subgroup: Subgroup) -> tuple[Signal, ...]:
        """z ← λx + (1−λ)z, held against its own limits; V ← λ²·SE² + (1−λ)²·V."""
        plan, centre = self._plan, self._centre
        if subgroup.size != self._size:
            self._size = subgroup.size
            self._se = standard_error(self._baseline, subgroup.size)
        x, se, lam = subgroup.mean, self._se, plan.lam
        if plan.clip is not None:
            reach = plan.clip * se
            x = min(max(x, centre - reach), centre + reach)
        average = lam * x + (1.0 - lam) * self._average
        if plan.asymptotic:
            variance = lam / (2.0 - lam) * se * se
        else:
            variance = (lam * se) ** 2 + (1.0 - lam) ** 2 * self._variance
        reach = plan.width * math.sqrt(variance)
        self._average = self._shown = average
        self._variance, self._reach = variance, reach
        lower, upper = centre - reach, centre + reach
        if lower <= average <= upper:
            return NO_SIGNALS
        chart = plan.chart
        if average > upper:
            signal = Signal("ewma-upper", "up", chart, average, lower, upper)
            wanted = self._up
        else:
            signal = Signal("ewma-lower", "down", chart, average, lower, upper)
            wanted = self._down
        if not wanted:
            return NO_SIGNALS
        if not plan.hold:
            self._average, self._variance = centre, 0.0
        return (signal,)

    def rows(self, name: str, signals: tuple[Signal, ...]) -> tuple[Row, ...]:
        """The average as it was compared, before any restart."""
        if self._shown is None:
            return ()
        chart, centre, reach = self._plan.chart, self._centre, self._reach
        rules = met(signals, chart)
        return (
            Row(name, chart, chart, self._shown, centre, centre - reach, centre + reach, rules),
        )

    def restart(self) -> None:
        """The average at the centre, its limits' clock at zero."""
        self._average, self._variance = self._centre, 0.0
        self._shown = None
