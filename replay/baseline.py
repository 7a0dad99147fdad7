"""A baseline from recordings: readings to subgroups, what is left out of them, and the judgement.

Knows how recordings become what ``monitor.baselining`` judges. Must not know files, words or the
command line.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from monitor.baselining.assess import Assessment, Baselines, assess, baselines
from monitor.baselining.estimating import BetweenBy, SigmaBy, estimate
from monitor.baselining.material import Clues, Flags, StreamSubgroups
from monitor.baselining.outside import Outside, outside
from monitor.baselining.stuck import stuck
from monitor.methods.cycles import cycle
from monitor.methods.shape import smallest_step
from monitor.plan import CharacteristicPlan, DetectorPlan, Stream
from replay.baseline_rings import Rung, listen
from replay.baseline_verdict import heard
from replay.readings import Readings
from replay.subgrouping import Subgroups, subgroups
from replay.tuning.running import Running

_ROUNDS = 20

Configured = Callable[[Baselines], CharacteristicPlan | None]
"""The characteristic as configured, held against such a baseline: constants may be solved from it.
None where that cannot be done."""


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
    and left out because they lay outside, with where they did.

    ``rung`` is what the configured detectors did on the recording itself, None where nothing can be
    expected of them; ``rate`` is subgroups of all streams, those left out too, in a second of
    running time, None where they take no time."""

    assessment: Assessment
    rung: Rung | None
    rate: float | None
    readings: Readings
    clues: Clues
    abandoned: int
    in_spans: int
    left_outside: tuple[Outside, ...]
    left_outside_subgroups: int

    @property
    def left_out(self) -> int:
        """Subgroups left out by choice."""
        return self.in_spans + self.left_outside_subgroups


def unmatched(readings: Readings, span: tuple[int, int]) -> bool:
    """Whether a span to leave out holds no reading, and no subgroup was being gathered in it."""
    first, last = span
    for each in readings.streams:
        if np.searchsorted(each.time, first) < np.searchsorted(each.time, last, side="right"):
            return False
        if not _outside_spans(subgroups(readings.plan.subgroup, each), [span]).all():
            return False
    return True


def baseline(
    readings: Readings,
    choices: Choices,
    configured: Configured,
    tell: Callable[[str], None] = lambda _: None,
) -> Estimated:
    """The baseline of one characteristic; ``tell`` hears what is being done. ValueError where no
    stream has two subgroups."""
    tell("estimating…")
    plan = readings.plan
    streams: list[StreamSubgroups] = []
    abandoned = in_spans = gathered = 0
    for each in readings.streams:
        found = subgroups(plan.subgroup, each)
        abandoned += found.spans.abandoned
        gathered += len(found)
        kept = _outside_spans(found, choices.spans)
        in_spans += int(np.count_nonzero(~kept))
        streams.append(material(each.stream, found).keeping(kept))
    clues = _clues(readings, choices.spans)
    dropped = 0
    points: tuple[Outside, ...] = ()
    if choices.outside:
        streams, points, dropped = _leave_outside(streams, choices, clues.step)
    held = _Held(configured)
    assessment = assess(
        streams,
        clues,
        held.detectors,
        unit=plan.unit,
        left_out=in_spans + dropped,
        sigma=choices.sigma,
        between=choices.between,
    )
    rung = None
    if held.plan is not None and assessment.delivered and assessment.verdict != "refuse":
        tell("playing the configured detectors over it…")
        rung = listen(
            held.plan,
            readings.streams,
            choices.spans,
            {(point.stream, point.time) for point in points},
            assessment.delivered.subgroups,
            assessment.delivered.left_out,
        )
    seconds = Running(readings.streams).whole
    rate = gathered / seconds if seconds else None
    if rung is not None:
        assessment = heard(assessment, rung, rate)
    return Estimated(assessment, rung, rate, readings, clues, abandoned, in_spans, points, dropped)


class _Held:
    """``plan``: as configured, held against the baseline that was asked about last."""

    def __init__(self, configured: Configured) -> None:
        self._configured = configured
        self.plan: CharacteristicPlan | None = None

    def detectors(self, found: Baselines) -> Callable[[Stream], Sequence[DetectorPlan]]:
        """Of each stream, under such a baseline."""
        plan = self.plan = self._configured(found)

        def of(stream: Stream) -> Sequence[DetectorPlan]:
            judgement = None if plan is None else plan.judgement_of(stream)
            return () if judgement is None else judgement.detectors

        return of


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


def _clues(readings: Readings, spans: Sequence[tuple[int, int]]) -> Clues:
    plan = readings.plan
    step = plan.resolution
    if step is None:
        steps = [smallest_step(each.value) for each in readings.streams]
        step = min((each for each in steps if each > 0), default=None)
    still = []
    for each in readings.streams:
        kept = np.ones(len(each.time), np.bool_)
        for start, stop in spans:
            kept &= (each.time < start) | (each.time > stop)
        still.append((each.stream, each.time[kept], each.value[kept]))
    return Clues(step, cycle([each.value for each in readings.streams]), stuck(still))
