"""One setting as the result tells it: false alarms seen, the interval they support, its tail.

Knows signals, tails and running time. Must not know drifts, ranks or words for people.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.plan import CusumPlan, EwmaPlan, Scheme
from replay.readings import Times
from replay.tuning import counting
from replay.tuning.candidates import limit
from replay.tuning.grouped import Grouped
from replay.tuning.judging import Judged, in_proof
from replay.tuning.labels import Label
from replay.tuning.paths import Signals
from replay.tuning.result import (
    Alarm,
    Delay,
    Extrapolated,
    Grouping,
    Observed,
    Range,
    Setting,
    Tail,
)
from replay.tuning.running import PROVE, Running
from replay.tuning.scoring import score
from replay.tuning.tails import TailFit

ALARMS = 500
_POINTS = 200

WANDERS = "the process wanders: no recording foretells its false alarms"
TOO_FEW = "the last part holds too few peaks of the statistic to draw a tail through"
NOT_EXPONENTIAL = "the tail of the statistic is not of the kind that can be drawn on"
TOO_LONG = "more than 50 times the last part is not told"
CONTRADICTED = "it rang far more often than the tail of its statistic has it"


@dataclass(frozen=True, slots=True)
class Place:
    """Where signals are told from: running time, labels, and the names of streams."""

    running: Running
    labels: tuple[Label, ...]
    streams: tuple[str, ...]
    promise: float


def setting(
    judged: Judged,
    grouped: Grouped,
    number: int,
    found: Grouping,
    place: Place,
    delays: Sequence[Delay],
) -> Setting:
    """The setting, not ranked yet; ``number`` is its grouping's place."""
    candidate, scheme = judged.candidate, judged.scheme
    counted = in_proof(grouped, judged.signals)
    wanders = found.wander.wanders
    observed = _observed(grouped, counted, place, found, wanders)
    extrapolated, why, lowest = _extrapolated(judged, found)
    if extrapolated is not None and contradicted(observed, extrapolated.interval.low):
        # As where a stream lies off its baseline all the time: its sum never rests, so that all of
        # its signals belong to one peak, or to none that begins in the last part.
        extrapolated, why, lowest = None, CONTRADICTED, 0.0
    asked = place.promise / candidate.part
    return Setting(
        name=candidate.name,
        kind=candidate.kind,
        chart=scheme.chart,
        origin=candidate.origin,
        grouping=number,
        constants=constants(scheme),
        catch=candidate.catch,
        ignore=candidate.ignore,
        observed=observed,
        extrapolated=extrapolated,
        no_interval=why,
        tail=None if judged.proved is None else _tail(judged.proved, limit(scheme)),
        delays=tuple(delays),
        curve=(),
        events=score(
            place.labels, place.streams, _instants(grouped, judged.signals), place.running
        ),
        alarms=_alarms(grouped, counted, place),
        asked=asked,
        meets=asked <= min(lowest, found.supports) and not contradicted(observed, asked),
        rank=None,
        unranked="",
    )


def contradicted(observed: Observed, asked: float) -> bool:
    """Whether the count by itself is of an interval shorter than ``asked`` seconds."""
    counted = observed.interval
    return counted is not None and counted.high is not None and counted.high < asked


def constants(scheme: Scheme) -> tuple[tuple[str, float], ...]:
    """Keys and values as the configuration writes them."""
    match scheme:
        case CusumPlan():
            found = [("k", scheme.k), ("h", scheme.h)]
            if scheme.head_start:
                found.append(("head_start", scheme.head_start))
        case EwmaPlan():
            found = [("lambda", scheme.lam), ("width", scheme.width)]
        case _:
            return (("width", scheme.width),)
    return tuple(found if scheme.clip is None else [*found, ("clip", scheme.clip)])


def _observed(
    grouped: Grouped,
    counted: Sequence[Signals],
    place: Place,
    found: Grouping,
    wanders: bool,
) -> Observed:
    alarms = sum(len(each.at) for each in counted)
    seconds = grouped.proof / found.rate
    if wanders:
        return Observed(alarms, seconds, None)
    instants = np.concatenate(_instants(grouped, counted))
    moments = place.running.seconds(instants) - PROVE * place.running.whole
    return Observed(alarms, seconds, counting.between(alarms, seconds, moments))


def _extrapolated(judged: Judged, found: Grouping) -> tuple[Extrapolated | None, str, float]:
    """The interval, why there is none, and the least that it is in seconds, told or not."""
    tail = judged.proved
    if found.wander.wanders:
        return None, WANDERS, 0.0
    if tail is None:
        return None, TOO_FEW, 0.0
    if not tail.exponential:
        return None, NOT_EXPONENTIAL, 0.0
    interval = tail.interval(limit(judged.scheme))
    factor = tail.factor(interval)
    seconds = interval / found.rate
    lowest = _least(interval, factor) / found.rate
    if interval > tail.supports():
        told = found.supports
        return Extrapolated(told, factor, Range(min(lowest, told), None)), TOO_LONG, lowest
    return Extrapolated(seconds, factor, Range(lowest, seconds * factor)), "", lowest


def _least(interval: float, factor: float) -> float:
    if factor == np.inf or interval == np.inf:
        return 0.0
    return interval / factor


def _tail(tail: TailFit, at: float) -> Tail:
    count = min(_POINTS, len(tail.levels))
    return Tail(
        levels=tuple(tail.levels[:count][::-1].tolist()),
        rates=tuple((np.arange(count, 0, -1) / tail.subgroups).tolist()),
        limit=at,
        threshold=tail.threshold,
        rate=tail.rate,
        scale=tail.scale,
        scaled="level" if tail.weight is None else "square",
        weight=tail.weight,
        unit=tail.unit,
    )


def _instants(grouped: Grouped, signals: Sequence[Signals]) -> list[Times]:
    return [stream.last[each.at] for stream, each in zip(grouped.streams, signals, strict=True)]


def _alarms(grouped: Grouped, counted: Sequence[Signals], place: Place) -> tuple[Alarm, ...]:
    found = [
        Alarm(time, name, "up" if upper else "down")
        for name, stream, each in zip(place.streams, grouped.streams, counted, strict=True)
        for time, upper in zip(
            stream.last[each.at[:ALARMS]].tolist(), each.up[:ALARMS].tolist(), strict=True
        )
    ]
    found.sort(key=lambda alarm: alarm.time)
    return tuple(found[:ALARMS])
