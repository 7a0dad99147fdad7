"""Subgroups of simulated streams whose truth is known, for tests of baselines.

Knows what ``monitor.baselining`` takes. A test says what matters to it; all else is a subgroup a
minute from 2026-03-02 on, with a CUSUM made for one false alarm in a million.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from plans import START

from monitor.baselining.assess import Assessment, assess
from monitor.baselining.material import Clues, StreamSubgroups
from monitor.plan import CusumPlan, DetectorPlan, RulePlan, Scheme, ShewhartPlan, Stream
from monitor.times import SECOND

Readings = NDArray[np.float64]

MINUTE = 60 * SECOND

CUSUM = CusumPlan("mean", 0.5, 12.657)
"""One false alarm in 1e6 subgroups (the project's table of decision intervals)."""
SHEWHART = ShewhartPlan("mean", 4.892, (RulePlan("outside", 4.892),))
"""The same, by the normal distribution."""


def gathered(readings: Readings, stream: Stream = (), every: int = MINUTE) -> StreamSubgroups:
    """Each row of ``readings`` as a subgroup."""
    count, size = readings.shape
    alone = np.full(count, np.nan)
    return StreamSubgroups(
        stream,
        START + np.arange(1, count + 1) * every,
        np.full(count, size),
        readings.mean(axis=1),
        readings.var(axis=1, ddof=1) if size > 1 else alone,
        np.ptp(readings, axis=1) if size > 1 else alone,
        np.zeros(count, np.bool_),
    )


def heads(*each: Readings) -> list[StreamSubgroups]:
    """A stream a head."""
    return [gathered(readings, (("head", str(number)),)) for number, readings in enumerate(each, 1)]


def assessed(
    *streams: StreamSubgroups, scheme: Scheme | None = CUSUM, clues: Clues | None = None
) -> Assessment:
    """The judgement of these streams under one detector, or none."""
    detectors = () if scheme is None else (DetectorPlan("it", "any", scheme, "revision"),)
    return assess(streams, clues or Clues(), lambda _: lambda _: detectors, unit="g")


def kinds(found: Assessment) -> dict[str, str]:
    """The grade of each reason that was given."""
    return {reason.kind: reason.grade for reason in found.reasons}


def following(chance: np.random.Generator, correlation: float, count: int) -> Readings:
    """Standard normal values of which each follows the one before, AR(1), shape (count, 1)."""
    noise = chance.normal(size=count) * np.sqrt(1 - correlation**2)
    noise[0] /= np.sqrt(1 - correlation**2)
    values = np.empty(count)
    last = 0.0
    for index, each in enumerate(noise.tolist()):
        last = correlation * last + each
        values[index] = last
    return values[:, None]
