"""Estimates of spread from subgroups: within them, between them, and altogether.

Knows published estimators. Must not know streams, limits, or which estimate is to be trusted.

Arrays have one element a subgroup: ``n`` readings, their ``mean``, ``variance`` (divisor n − 1; nan
for a single reading) and ``range``. Results are in the gauge's unit; nan where nothing is known.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.methods.constants import c4, c5, d2, d3
from monitor.methods.normal import Array

Counts = NDArray[np.int64]
Flags = NDArray[np.bool_]

_MEDIAN_MOVING_RANGE = math.sqrt(2) * 0.674489750196082
"""Median of |X − Y| of two independent standard normal values: √2 times their upper quartile."""


def pooled_sigma(n: Counts, variance: Array) -> float:
    """√(Σ(n−1)s²/Σ(n−1)), divided by c4 of as many degrees of freedom and one, so that it is
    unbiased for sigma (ISO 7870-2)."""
    several = n > 1
    freedom = int((n[several] - 1).sum())
    if not freedom:
        return math.nan
    return math.sqrt(float((n[several] - 1) @ variance[several]) / freedom) / c4(freedom + 1)


def sigma_from_ranges(n: Counts, ranges: Array) -> float:
    """R̄/d2 (ISO 7870-2); where sizes differ, R/d2 of each, weighted by its precision d2²/d3²."""
    return _from_each(n, ranges, d2, d3)


def sigma_from_sds(n: Counts, variance: Array) -> float:
    """s̄/c4 (ISO 7870-2); where sizes differ, s/c4 of each, weighted by c4²/(1 − c4²)."""
    return _from_each(n, np.sqrt(variance), c4, c5)


def _from_each(
    n: Counts, statistic: Array, centre: Callable[[int], float], spread: Callable[[int], float]
) -> float:
    total = weight = 0.0
    for size in np.unique(n[n > 1]).tolist():
        of_size = statistic[n == size]
        precision = (centre(size) / spread(size)) ** 2
        total += precision * float(of_size.sum()) / centre(size)
        weight += precision * len(of_size)
    return total / weight if weight else math.nan


def moving_range_sigma(values: Array, broken: Flags) -> float:
    """Mean moving range of successive values over d2 of two, 1.128 (ISO 7870-2; NIST/SEMATECH
    e-Handbook 6.3.2.2). No range is taken across a break, before the element where ``broken``."""
    ranges = _moving_ranges(values, broken)
    return float(ranges.mean()) / d2(2) if len(ranges) else math.nan


def median_moving_range_sigma(values: Array, broken: Flags) -> float:
    """Median moving range over 0.954: a few wild values do not move it."""
    ranges = _moving_ranges(values, broken)
    return float(np.median(ranges)) / _MEDIAN_MOVING_RANGE if len(ranges) else math.nan


def _moving_ranges(values: Array, broken: Flags) -> Array:
    return np.asarray(np.abs(np.diff(values))[~broken[1:]])


@dataclass(frozen=True, slots=True)
class Components:
    """A one-way analysis of variance of readings by subgroup.

    ``between`` and ``within`` are mean squares with their degrees of freedom; ``size`` is n₀, the
    size of subgroups that counts where it varies.
    """

    between: float
    between_freedom: int
    within: float
    within_freedom: int
    size: float

    @property
    def ratio(self) -> float:
        """F: near 1 where nothing acts between subgroups that does not act within them."""
        return self.between / self.within if self.within else math.nan

    @property
    def sigma_between(self) -> float:
        """Standard deviation of subgroup means beyond what their readings explain; 0 where they
        explain all of it."""
        return math.sqrt(max(0.0, (self.between - self.within) / self.size))


def components(n: Counts, mean: Array, variance: Array) -> Components | None:
    """Components of variance by the method of moments (S. R. Searle, G. Casella & C. E. McCulloch
    1992, Variance Components, chapter 3). None where all subgroups are single readings, or one."""
    several = n > 1
    freedom = int((n[several] - 1).sum())
    if not freedom or len(n) < 2:
        return None
    total = int(n.sum())
    centre = float(n @ mean) / total
    between = float(n @ (mean - centre) ** 2) / (len(n) - 1)
    within = float((n[several] - 1) @ variance[several]) / freedom
    size = (total - float(n @ n) / total) / (len(n) - 1)
    return Components(between, len(n) - 1, within, freedom, size)


def total_sigma(n: Counts, mean: Array, variance: Array) -> float:
    """Standard deviation of all readings (divisor N − 1), from their subgroups."""
    total = int(n.sum())
    if total < 2:
        return math.nan
    centre = float(n @ mean) / total
    within = float((n - 1) @ np.where(n > 1, variance, 0.0))
    return math.sqrt((within + float(n @ (mean - centre) ** 2)) / (total - 1))
