"""A baseline from recordings: readings to subgroups, what is left out of them, and the judgement.

Knows how recordings become what ``monitor.baselining`` judges. Must not know files, words or the
command line.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor import times
from monitor.baselining.assess import Assessment, Detectors, assess, baselines
from monitor.baselining.estimating import BetweenBy, SigmaBy, estimate
from monitor.baselining.material import Clues, Flags, StreamSubgroups
from monitor.baselining.outside import Outside, outside
from monitor.methods.cycles import cycle
from monitor.methods.shape import smallest_step
from monitor.plan import Stream
from replay.readings import Readings
from replay.subgrouping import Subgroups, subgroups

_ROUNDS = 20


@dataclass(frozen=True, slots=True)
class Choices:
    """What the user chose: estimators, spans of event time to leave out (µs, both ends included),
    and whether to leave out what lies outside."""

    sigma: SigmaBy = "pooled"
    between: BetweenBy = "components"
    spans: tuple[tuple[int, int], ...] = ()
    outside: bool = False


@dataclass(frozen=True, slots=True)
class Estimated:
    """The judgement, and how it came about: subgroups given up unfinished, left out for their time,
    and left out because they lay outside, with where they did."""

    assessment: Assessment
    readings: Readings
    clues: Clues
    abandoned: int
    in_spans: int
    left_outside: tuple[Outside, ...]
    left_outside_subgroups: int

    @property
    def rate(self) -> float | None:
        """Subgroups a second of all streams; None where they take no time."""
        found = self.assessment.estimate
        seconds = (found.last - found.first) / times.SECOND
        return found.subgroups / seconds if seconds else None

    @property
    def left_out(self) -> int:
        """Subgroups left out by choice."""
        return self.in_spans + self.left_outside_subgroups


def baseline(readings: Readings, choices: Choices, detectors: Detectors) -> Estimated:
    """The baseline of one characteristic. ValueError where no stream has two subgroups."""
    plan = readings.plan
    streams: list[StreamSubgroups] = []
    abandoned = in_spans = 0
    for each in readings.streams:
        found = subgroups(plan.subgroup, each)
        abandoned += found.spans.abandoned
        kept = _outside_spans(found, choices.spans)
        in_spans += int(np.count_nonzero(~kept))
        streams.append(material(each.stream, found).keeping(kept))
    clues = _clues(readings)
    dropped = 0
    points: tuple[Outside, ...] = ()
    if choices.outside:
        streams, points, dropped = _leave_outside(streams, choices, clues.step)
    assessment = assess(
        streams,
        clues,
        detectors,
        unit=plan.unit,
        left_out=in_spans + dropped,
        sigma=choices.sigma,
        between=choices.between,
    )
    return Estimated(assessment, readings, clues, abandoned, in_spans, points, dropped)


def material(stream: Stream, found: Subgroups) -> StreamSubgroups:
    """Subgroups as the judgement takes them."""
    statistics = found.statistics
    return StreamSubgroups(
        stream,
        found.last,
        statistics.n,
        statistics.mean,
        statistics.sd**2,
        statistics.range,
        found.spans.broken,
    )


def _outside_spans(found: Subgroups, spans: Sequence[tuple[int, int]]) -> Flags:
    kept = np.ones(len(found), np.bool_)
    for start, stop in spans:
        kept &= (found.last < start) | (found.first > stop)
    return kept


def _leave_outside(
    streams: list[StreamSubgroups], choices: Choices, step: float | None
) -> tuple[list[StreamSubgroups], tuple[Outside, ...], int]:
    """Without what lies outside, nor what does once that is gone."""
    points: list[Outside] = []
    dropped = 0
    for _ in range(_ROUNDS):
        used = [each for each in streams if len(each) > 1]
        if not used:
            break
        written = baselines(estimate(used, choices.sigma, choices.between))
        own = {each.stream: written.of(each.stream) for each in used}
        found = outside(used, own, step)
        if not found.points:
            break
        points += found.points
        flags = {s.stream: off for s, off in zip(used, found.flags, strict=True)}
        dropped += sum(int(np.count_nonzero(off)) for off in found.flags)
        streams = [
            each.keeping(~flags[each.stream]) if each.stream in flags else each for each in streams
        ]
    points.sort(key=lambda point: (point.time, point.stream))
    return streams, tuple(points), dropped


def _clues(readings: Readings) -> Clues:
    plan = readings.plan
    step = plan.resolution
    if step is None:
        steps = [smallest_step(each.value) for each in readings.streams]
        step = min((each for each in steps if each > 0), default=None)
    return Clues(step, cycle([each.value for each in readings.streams]))
