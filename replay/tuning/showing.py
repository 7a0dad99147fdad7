"""One setting as the result tells it: false alarms seen, the interval they support, its tail.

Knows signals, tails and running time. Must not know drifts, ranks or words for people.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.plan import CusumPlan, EwmaPlan, Scheme
from replay.readings import Times
from replay.tuning import counting, intervals
from replay.tuning.candidates import limit
from replay.tuning.grouped import Grouped
from replay.tuning.judging import Judged, in_proof
from replay.tuning.labels import Label
from replay.tuning.paths import Signals
from replay.tuning.result import (
    Alarm,
    Delay,
    Grouping,
    Observed,
    Setting,
    Tail,
)
from replay.tuning.running import PROVE, Running
from replay.tuning.scoring import score
from replay.tuning.tails import TailFit

ALARMS = 500
_POINTS = 200


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
    told, why, lowest = intervals.extrapolated(judged, found, observed)
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
        extrapolated=told,
        no_interval=why,
        tail=None if judged.proved is None else _tail(judged.proved, limit(scheme)),
        delays=tuple(delays),
        curve=(),
        events=score(
            place.labels, place.streams, _instants(grouped, judged.signals), place.running
        ),
        alarms=_alarms(grouped, counted, place),
        asked=asked,
        meets=asked <= min(lowest, found.supports) and not intervals.contradicted(observed, asked),
        rank=None,
        unranked="",
    )


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
