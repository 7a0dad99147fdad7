"""How long it is from one false alarm to the next: by the count, by the tail, or why none is told.

Knows the tail and the count of one setting. Must not know recordings, drifts or ranks.
"""

from __future__ import annotations

import math

import numpy as np

from monitor.plan import EwmaPlan, Scheme
from replay.tuning.candidates import limit
from replay.tuning.judging import Judged
from replay.tuning.result import Extrapolated, Grouping, Observed, Range
from replay.tuning.tails import FEWEST

_NEAR_MOST = 0.7
_FAR_MORE = 5.0
"""Of signals to peaks beyond the limit: as where a stream lies off its baseline all the time, and
its sum never rests. All of its signals belong to one peak, or to none that begins in the last part;
they tell nothing of false alarms. Where neighbours correlate, few peaks give more than two."""
WANDERS = "the process wanders: no recording foretells its false alarms"
MOVED = "the centre moved and stayed away: what was before does not foretell what comes after"
TOO_FEW = "the last part holds too few peaks of the statistic to draw a tail through"
NOT_EXPONENTIAL = "the tail of the statistic is not of the kind that can be drawn on"
TOO_LONG = "more than 50 times the last part is not told"
COARSE = "the gauge's steps are so coarse that its points fall on too few values to draw on"
CONTRADICTED = "it rang far more often than the tail of its statistic has it"


def extrapolated(
    judged: Judged, found: Grouping, observed: Observed
) -> tuple[Extrapolated | None, str, float]:
    """The interval, why there is none, and the least that it is in seconds, told or not."""
    tail = judged.proved
    if found.wander.wanders:
        return None, unsteady(found), 0.0
    if tail is None:
        return None, CONTRADICTED if _by_count(observed) else TOO_FEW, 0.0
    interval = tail.interval(limit(judged.scheme))
    if counted := _by_count(observed):
        if tail.exponential and interval > _FAR_MORE * counted.seconds * found.rate:
            return None, CONTRADICTED, 0.0
        return counted, "", counted.interval.low
    if judged.coarse:
        return None, COARSE, 0.0
    if judged.wild or not tail.exponential:
        return None, NOT_EXPONENTIAL, 0.0
    factor = tail.factor(interval)
    seconds = interval / found.rate
    lowest = _least(interval, factor) / found.rate
    if contradicted(observed, lowest):
        return None, CONTRADICTED, 0.0
    if interval > tail.supports():
        told = found.supports
        return Extrapolated(told, factor, Range(min(lowest, told), None)), TOO_LONG, lowest
    high = None if bounded(judged.scheme) else seconds * factor
    return Extrapolated(seconds, factor, Range(lowest, high)), "", lowest


def unsteady(found: Grouping) -> str:
    """Why there is no interval where ``found.wander`` forbids one."""
    return MOVED if found.wander.moved else WANDERS


def _by_count(observed: Observed) -> Extrapolated | None:
    """What rings so often needs no tail, which would miss besides that a detector that has rung
    begins afresh, and may ring again before its statistic comes to rest."""
    found = observed.interval
    if observed.alarms < FEWEST or found is None or found.high is None:
        return None
    seconds = observed.seconds / observed.alarms
    return Extrapolated(seconds, max(seconds / found.low, found.high / seconds), found, True)


def bounded(scheme: Scheme) -> bool:
    """Whether the limit lies so near the most that clipped values take an average to, that it is
    passed more seldom than any tail has it; how seldom, none tells."""
    if not isinstance(scheme, EwmaPlan) or scheme.clip is None:
        return False
    return scheme.width > _NEAR_MOST * scheme.clip * math.sqrt((2 - scheme.lam) / scheme.lam)


def _least(interval: float, factor: float) -> float:
    if factor == np.inf or interval == np.inf:
        return 0.0
    return interval / factor


def contradicted(observed: Observed, asked: float) -> bool:
    """Whether the count by itself is of an interval shorter than ``asked`` seconds."""
    counted = observed.interval
    return counted is not None and counted.high is not None and counted.high < asked
