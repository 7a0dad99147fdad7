"""Subgroups of every stream, held against a baseline: what array detectors work on.

Knows means, spreads and standard errors. Must not know detectors or how long a recording runs.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.plan import BaselinePlan, SubgroupPlan
from replay.readings import Places, StreamReadings, Times, Values
from replay.subgrouping import Subgroups, subgroups


@dataclass(frozen=True, slots=True)
class GroupedStream:
    """One stream's subgroups, in the gauge's unit.

    ``centre``, ``sigma`` and ``between`` are of its baseline. ``error`` is the standard error of
    each mean; ``restarts`` are rising indices of the subgroups before which the gauge restarted,
    and detectors with it. Subgroups before ``fit`` are fitted on, those from ``prove`` on prove;
    ``left_out`` marks those that a labelled cause disturbs.
    """

    readings: StreamReadings
    n: Places
    mean: Values
    sd: Values
    start: Places
    stop: Places
    last: Times
    centre: float
    sigma: float
    between: float
    error: Values
    restarts: Places
    fit: int
    prove: int
    left_out: NDArray[np.bool_]

    def __len__(self) -> int:
        return len(self.mean)


@dataclass(frozen=True, slots=True)
class Grouped:
    """Every stream under one way of gathering; ``size`` is readings in a usual subgroup."""

    plan: SubgroupPlan
    size: int
    streams: tuple[GroupedStream, ...]

    @property
    def fit(self) -> int:
        """Subgroups of all streams that are fitted on."""
        return sum(int(np.count_nonzero(~s.left_out[: s.fit])) for s in self.streams)

    @property
    def proof(self) -> int:
        """Subgroups of all streams that prove."""
        return sum(int(np.count_nonzero(~s.left_out[s.prove :])) for s in self.streams)


def standard_errors(sigma: float, between: float, n: Places) -> Values:
    """Of means of ``n``: √(sigma_between² + sigma²/n), each as the engine's floats give it."""
    sizes, which = np.unique(n, return_inverse=True)
    errors = np.array([math.sqrt(between**2 + sigma**2 / int(size)) for size in sizes])
    return errors[which] if len(sizes) else np.empty(0)


def estimate(found: Subgroups, used: NDArray[np.bool_]) -> BaselinePlan | None:
    """Centre and spread of the subgroups that are ``used``; None where they do not vary at all, or
    are too few.

    Sigma is pooled within subgroups (ISO 22514-2: √(Σν s²/Σν)), of single readings that of all of
    them. Sigma between is what the variance of means has beyond it; subgroups of unlike size weigh
    alike, at their mean 1/n.
    """
    n, mean = found.statistics.n[used], found.statistics.mean[used]
    if len(mean) < 2:
        return None
    centre, total = float(mean.mean()), float(mean.var(ddof=1))
    freedom = n - 1
    if freedom.sum() == 0:
        sigma, between = math.sqrt(total), 0.0
    else:
        several = freedom > 0
        squares = freedom[several] * found.statistics.sd[used][several] ** 2
        within = float(squares.sum() / freedom.sum())
        sigma = math.sqrt(within)
        between = math.sqrt(max(0.0, total - within * float((1.0 / n).mean())))
    if not sigma > 1e-9 * max(abs(centre), 1e-9):
        return None
    return BaselinePlan(centre, sigma, between, "")


def group(
    plan: SubgroupPlan,
    readings: StreamReadings,
    *,
    fit_to: int,
    prove_from: int,
    left_out: Sequence[tuple[int, int]],
    baseline: BaselinePlan | None = None,
) -> GroupedStream | None:
    """The stream's subgroups against ``baseline``, or against that of its own first part.

    ``fit_to`` and ``prove_from`` are instants (µs); ``left_out`` are spans of instants. None where
    the first part gives no baseline.
    """
    found = subgroups(plan, readings)
    disturbed = np.zeros(len(found), np.bool_)
    for begin, end in left_out:
        disturbed |= (found.last >= begin) & (found.first <= end)
    fit = int(np.searchsorted(found.last, fit_to, side="right"))
    prove = int(np.searchsorted(found.first, prove_from, side="left"))
    if baseline is None:
        used = ~disturbed
        used[fit:] = False
        baseline = estimate(found, used)
        if baseline is None:
            return None
    n, start = found.statistics.n, found.spans.start
    return GroupedStream(
        readings=readings,
        n=n,
        mean=found.statistics.mean,
        sd=found.statistics.sd,
        start=start,
        stop=found.spans.stop,
        last=found.last,
        centre=baseline.mean,
        sigma=baseline.sigma,
        between=baseline.sigma_between,
        error=standard_errors(baseline.sigma, baseline.sigma_between, n),
        restarts=np.unique(np.searchsorted(start, readings.breaks)),
        fit=fit,
        prove=prove,
        left_out=disturbed,
    )
