"""Subgroups that do not belong to the rest: beyond limits that hardly any innocent one crosses.

Knows exact limits of means and variances. Must not know what will be done about them.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from monitor.baselining.estimating import Values
from monitor.baselining.material import Flags, StreamSubgroups
from monitor.methods import chi_square
from monitor.methods.normal import Array, sf, upper_quantile
from monitor.plan import Stream

_QUARTILE = 0.674489750196082
"""The upper quartile of the normal distribution."""
_ROUGH = 3.5
"""Three errors of a median absolute deviation, times √N."""

CHANCE = 0.05
"""Of listing anything at all where all is normal, independent and alike."""


@dataclass(frozen=True, slots=True)
class Outside:
    """A subgroup outside: the event time of its last reading (µs), what lies outside, its value and
    the limit it crossed, in the gauge's unit (a spread as a standard deviation)."""

    stream: Stream
    time: int
    what: Literal["mean", "spread"]
    value: float
    limit: float


@dataclass(frozen=True, slots=True)
class Found:
    """What lies outside, in order of time, and for each stream which of its subgroups do.

    ``beyond_three``: how many means lie beyond three standard errors, where ``expected`` would if
    they were normal.
    """

    points: tuple[Outside, ...]
    flags: tuple[Flags, ...]
    beyond_three: int
    expected: float


def outside(
    streams: Sequence[StreamSubgroups], values: Mapping[Stream, Values], step: float | None = None
) -> Found:
    """Means and spreads beyond limits so far out that all subgroups together, were they normal,
    would give one with a chance of 5 % (C. E. Bonferroni: each side of each gets its part).

    Where the middle half of the subgroups is clearly narrower than the baseline, which wild ones
    have widened then, limits go by the middle half: many strangers must not hide each other.
    ``step``: the gauge's, below which a spread may come from rounding alone and is not judged.
    """
    count = sum(map(len, streams))
    tail = CHANCE / (4 * max(count, 1))
    width = upper_quantile(tail)
    points: list[Outside] = []
    flags: list[Flags] = []
    beyond = 0
    for stream in streams:
        own = values[stream.stream]
        error = np.sqrt(own.sigma_between**2 + own.sigma**2 / stream.n)
        if not own.sigma:
            flags.append(np.zeros(len(stream), np.bool_))
            continue
        z = (stream.mean - own.mean) / error
        beyond += int(np.count_nonzero(np.abs(z) > 3))
        centre, narrower = _middle_half(z)
        off = np.abs(z - centre) > width * narrower
        for at in np.flatnonzero(off).tolist():
            reach = math.copysign(width * narrower, z[at] - centre)
            limit = own.mean + (centre + reach) * float(error[at])
            mean = float(stream.mean[at])
            points.append(Outside(stream.stream, int(stream.time[at]), "mean", mean, limit))
        for size in np.unique(stream.n[stream.n > 1]).tolist():
            lower, upper = (
                chi_square.lower_point(tail, size - 1) / (size - 1),
                chi_square.upper_point(tail, size - 1) / (size - 1),
            )
            ratio = np.where(stream.n == size, stream.variance / own.sigma**2, np.nan)
            usual = _usual(ratio[stream.n == size], size - 1)
            lower, upper = lower * usual, upper * usual
            if own.sigma * math.sqrt(lower) < (step or 0.0):
                lower = 0.0
            strange = (ratio < lower) | (ratio > upper)
            for at in np.flatnonzero(strange).tolist():
                limit = own.sigma * math.sqrt(upper if ratio[at] > upper else lower)
                sd = math.sqrt(float(stream.variance[at]))
                points.append(Outside(stream.stream, int(stream.time[at]), "spread", sd, limit))
            off = off | strange
        flags.append(off)
    points.sort(key=lambda point: (point.time, point.stream))
    return Found(tuple(points), tuple(flags), beyond, 2 * sf(3.0) * count)


def _middle_half(z: Array) -> tuple[float, float]:
    """Centre and spread of standardised means by the median and the median absolute deviation
    (F. R. Hampel 1974, J. American Statistical Association 69); 0 and 1 unless that is narrower by
    more than three of its own errors."""
    centre = float(np.median(z))
    spread = float(np.median(np.abs(z - centre))) / _QUARTILE
    narrower = spread * (1 + _ROUGH / math.sqrt(len(z)))
    return (centre, narrower) if 0 < narrower < 1 else (0.0, 1.0)


def _usual(ratio: Array, freedom: int) -> float:
    """By how much variances are smaller than the baseline's, by their median; 1 as above."""
    median = float(np.median(ratio)) * freedom / chi_square.lower_point(0.5, freedom)
    narrower = median * (1 + 2 * _ROUGH / math.sqrt(len(ratio)))
    return narrower if 0 < narrower < 1 else 1.0
