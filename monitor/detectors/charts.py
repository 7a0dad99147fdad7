"""What is charted: a subgroup's statistic, and the limits its baseline gives it at any size.

Knows baselines and published limits. Must not know rules, sums or signals.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any, Protocol

from monitor.memory import Remembers
from monitor.methods.constants import c5, d3, median_se
from monitor.methods.limits import (
    Limits,
    moving_range_limits,
    range_limits,
    sd_limits,
    variance_limits,
)
from monitor.plan import BaselinePlan
from monitor.subgroups import Subgroup


def standard_error(baseline: BaselinePlan, size: int) -> float:
    """Standard error of the mean of ``size`` readings: √(sigma_between² + sigma²/n)."""
    return math.sqrt(baseline.sigma_between**2 + baseline.sigma**2 / size)


class Chart(Protocol):
    """A statistic and its limits, in the characteristic's unit (a variance's: squared)."""

    name: str

    def value(self, subgroup: Subgroup) -> float | None:
        """The statistic; None where there is none to plot (the point is blank)."""

    def error(self, size: int) -> float:
        """Standard error of the statistic for a subgroup of ``size``."""

    def limits(self, size: int, width: float) -> Limits:
        """Limits ``width`` standard errors from the centre for a subgroup of ``size``, or exact
        ones that are crossed as often as such limits of a normal statistic."""

    def restart(self) -> None:
        """Forget the readings before."""

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""


class Location(Remembers):
    """The subgroup mean; with single readings, the individual value."""

    __slots__ = ("_baseline", "name")

    def __init__(self, name: str, baseline: BaselinePlan) -> None:
        self.name = name
        self._baseline = baseline

    def value(self, subgroup: Subgroup) -> float | None:
        """The mean."""
        return subgroup.mean

    def error(self, size: int) -> float:
        """√(sigma_between² + sigma²/n)."""
        return standard_error(self._baseline, size)

    def limits(self, size: int, width: float) -> Limits:
        """Mean ± width · SE."""
        reach = width * self.error(size)
        return Limits(self._baseline.mean, self._baseline.mean - reach, self._baseline.mean + reach)

    def restart(self) -> None:
        """Nothing is remembered."""


class Range(Remembers):
    """The range of a subgroup of two or more."""

    __slots__ = ("_exact", "_sigma", "name")

    def __init__(self, name: str, baseline: BaselinePlan, exact: bool) -> None:
        self.name = name
        self._sigma = baseline.sigma
        self._exact = exact

    def value(self, subgroup: Subgroup) -> float | None:
        """Largest less smallest."""
        return subgroup.range

    def error(self, size: int) -> float:
        """d3 σ."""
        return d3(size) * self._sigma

    def limits(self, size: int, width: float) -> Limits:
        """d2 σ ± width · d3 σ, not below zero; or exact."""
        return range_limits(size, self._sigma, width, exact=self._exact)

    def restart(self) -> None:
        """Nothing is remembered."""


class Sd(Remembers):
    """The standard deviation of a subgroup of two or more."""

    __slots__ = ("_exact", "_sigma", "name")

    def __init__(self, name: str, baseline: BaselinePlan, exact: bool) -> None:
        self.name = name
        self._sigma = baseline.sigma
        self._exact = exact

    def value(self, subgroup: Subgroup) -> float | None:
        """Sample standard deviation."""
        return subgroup.sd

    def error(self, size: int) -> float:
        """c5 σ."""
        return c5(size) * self._sigma

    def limits(self, size: int, width: float) -> Limits:
        """c4 σ ± width · c5 σ, not below zero; or exact."""
        return sd_limits(size, self._sigma, width, exact=self._exact)

    def restart(self) -> None:
        """Nothing is remembered."""


class Variance(Remembers):
    """The variance of a subgroup of two or more, in the unit squared; its limits are exact."""

    __slots__ = ("_sigma", "name")

    def __init__(self, name: str, baseline: BaselinePlan, exact: bool) -> None:
        self.name = name
        self._sigma = baseline.sigma

    def value(self, subgroup: Subgroup) -> float | None:
        """Sample variance."""
        return subgroup.variance

    def error(self, size: int) -> float:
        """σ²·√(2/(n − 1))."""
        return self._sigma**2 * math.sqrt(2 / (size - 1))

    def limits(self, size: int, width: float) -> Limits:
        """σ²·χ²/(n − 1)."""
        return variance_limits(size, self._sigma, width)

    def restart(self) -> None:
        """Nothing is remembered."""


class Median(Remembers):
    """The subgroup median, whose standard error is the exact one for the normal."""

    __slots__ = ("_baseline", "name")

    def __init__(self, name: str, baseline: BaselinePlan) -> None:
        self.name = name
        self._baseline = baseline

    def value(self, subgroup: Subgroup) -> float | None:
        """The median."""
        return subgroup.median

    def error(self, size: int) -> float:
        """√(sigma_between² + the median's own variance)."""
        return math.hypot(self._baseline.sigma_between, median_se(size) * self._baseline.sigma)

    def limits(self, size: int, width: float) -> Limits:
        """Mean ± width · SE."""
        reach = width * self.error(size)
        return Limits(self._baseline.mean, self._baseline.mean - reach, self._baseline.mean + reach)

    def restart(self) -> None:
        """Nothing is remembered."""


class MovingRange(Remembers):
    """The distance between neighbouring single readings; blank at the first and after a gap."""

    __slots__ = ("_exact", "_previous", "_sigma", "name")
    _memory = ("_previous",)

    def __init__(self, name: str, baseline: BaselinePlan, exact: bool) -> None:
        self.name = name
        self._sigma = baseline.sigma
        self._exact = exact
        self._previous: float | None = None

    def value(self, subgroup: Subgroup) -> float | None:
        """How far this reading lies from the one before."""
        previous = None if subgroup.broken else self._previous
        self._previous = subgroup.mean
        return None if previous is None else abs(subgroup.mean - previous)

    def error(self, size: int) -> float:
        """d3 σ of a range of two."""
        return d3(2) * self._sigma

    def limits(self, size: int, width: float) -> Limits:
        """Limits of a range of two; or exact."""
        return moving_range_limits(self._sigma, width, exact=self._exact)

    def restart(self) -> None:
        """The next reading has no neighbour."""
        self._previous = None


_LOCATION: dict[str, Callable[[str, BaselinePlan], Chart]] = {
    "mean": Location,
    "individual": Location,
    "median": Median,
}
_SPREAD: dict[str, Callable[[str, BaselinePlan, bool], Chart]] = {
    "range": Range,
    "sd": Sd,
    "variance": Variance,
    "moving_range": MovingRange,
}

SPREAD = frozenset(_SPREAD)
"""Charts whose signals say that the spread changed, not the mean: they have no direction."""


def chart(name: str, baseline: BaselinePlan, exact: bool = False) -> Chart:
    """The chart of that name; ``exact`` limits are of charts of spread."""
    if name in SPREAD:
        return _SPREAD[name](name, baseline, exact)
    return _LOCATION[name](name, baseline)
