"""From readings to what settings are judged on: subgroups, their pace, the textbook beside them.

Knows parts, baselines and rates. Must not know settings.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from monitor import stream_names
from monitor.baselining.stuck import Stuck, stuck
from monitor.commandline import CommandError
from monitor.plan import BaselinePlan, ByCount, CharacteristicPlan, Stream, SubgroupPlan
from monitor.times import format_duration
from replay.readings import StreamReadings, Times, Values
from replay.tuning import wandering
from replay.tuning.candidates import Request
from replay.tuning.catching import FLOORS, LEAST, Textbook
from replay.tuning.grouped import Grouped, GroupedStream, group
from replay.tuning.result import Baseline, Grouping, Refusal
from replay.tuning.running import FIT, PROVE, Running
from replay.tuning.tails import FAR

_MOST = 20_000
"""A drift is followed for at most so many readings."""


@dataclass(frozen=True, slots=True)
class Held:
    """One way of gathering at work.

    ``ours`` is held against baselines of the first part; ``theirs`` against the configuration's,
    None unless it is the configured way and every stream has one. ``asked``: whether settings are
    worked out for it. ``interval`` is the promise in subgroups of all streams.
    """

    plan: SubgroupPlan
    ours: Grouped
    theirs: Grouped | None
    asked: bool
    found: Grouping
    interval: float
    textbook: Textbook


@dataclass(frozen=True, slots=True)
class Prepared:
    """All of them, over the streams that can be judged; the parts' edges are instants (µs)."""

    streams: tuple[StreamReadings, ...]
    running: Running
    fit_to: int
    prove_from: int
    held: tuple[Held, ...]
    refusals: tuple[Refusal, ...]
    stuck: tuple[Stuck, ...]


def prepare(
    plan: CharacteristicPlan, readings: Sequence[StreamReadings], request: Request
) -> Prepared:
    """Raises CommandError where no stream can be judged."""
    if not readings:
        raise CommandError(f"the recordings hold no reading of {plan.name}")
    running = Running(readings)
    edges = running.instant(FIT), running.instant(PROVE)
    ways = _ways(plan, request.sizes)
    grouped = [[_group(how, each, edges, request) for each in readings] for how, _ in ways]
    good = [all(way[number] is not None for way in grouped) for number in range(len(readings))]
    streams = tuple(each for each, is_good in zip(readings, good, strict=True) if is_good)
    if not streams:
        raise CommandError(
            f"no stream of {plan.name} has subgroups that vary in both parts of the recording: "
            "record for longer, or look at the gauge"
        )
    refusals = tuple(
        Refusal(
            f"stream {stream_names.name(each.stream)}" if each.stream else "the stream",
            "it has too few readings in one part of the recording, or they never vary",
            "record for longer, or look at its gauge",
        )
        for each, is_good in zip(readings, good, strict=True)
        if not is_good
    )
    held = []
    for (how, asked), way in zip(ways, grouped, strict=True):
        kept = tuple(each for each, is_good in zip(way, good, strict=True) if each and is_good)
        ours = Grouped(how, _size(how, kept), kept)
        theirs = _theirs(plan, how, streams, edges, request) if how == plan.subgroup else None
        held.append(_hold(ours, theirs, asked, running, request))
    still = stuck(_uncaused(each, request) for each in streams)
    return Prepared(streams, running, *edges, _moved_alike(held), refusals, still)


def _moved_alike(held: Sequence[Held]) -> tuple[Held, ...]:
    """What moved in one way of gathering moved in all of them, though not all show it."""
    refusing = [each.found.wander for each in held if each.found.wander.wanders]
    moved = max(refusing, key=lambda wander: len(wander.moved), default=None)
    if moved is None or not moved.moved:
        return tuple(held)
    return tuple(
        each
        if each.found.wander.wanders
        else replace(
            each,
            found=replace(
                each.found, wander=replace(each.found.wander, wanders=True, moved=moved.moved)
            ),
        )
        for each in held
    )


def _uncaused(readings: StreamReadings, request: Request) -> tuple[Stream, Times, Values]:
    """What a stream's gauge showed while nothing was labelled as wrong."""
    kept = np.ones(len(readings.time), np.bool_)
    for begin, end in _causes(readings, request):
        kept &= (readings.time < begin) | (readings.time > end)
    return readings.stream, readings.time[kept], readings.value[kept]


def _causes(readings: StreamReadings, request: Request) -> list[tuple[int, int]]:
    name = stream_names.name(readings.stream)
    return [
        (label.begin, label.end)
        for label in request.labels
        if label.what == "cause" and label.concerns(name)
    ]


def horizon(held: Sequence[Held], catch: float) -> int:
    """How many readings of its stream a drift is followed: long enough for the slowest way of
    gathering, never more than a third of a stream's last part."""
    wanted = 0.0
    room = float(_MOST)
    for each in held:
        floor = each.textbook.floor(catch) or 0.0
        wanted = max(wanted, max(FLOORS * floor, LEAST) * each.textbook.readings)
        for stream in each.ours.streams:
            if stream.prove < len(stream):
                last = len(stream.readings.value) - int(stream.start[stream.prove])
                room = min(room, last / 3)
    return max(int(min(wanted, room)), 1)


def _ways(plan: CharacteristicPlan, sizes: Sequence[int]) -> list[tuple[SubgroupPlan, bool]]:
    """The sizes asked for, gaps as configured, and the configured way."""
    configured = plan.subgroup
    ways: dict[SubgroupPlan, bool] = {}
    for size in sizes:
        gap = configured.max_gap if isinstance(configured, ByCount) else None
        every = configured.every if isinstance(configured, ByCount) else None
        ways[ByCount(size, gap, every)] = True
    ways.setdefault(configured, not sizes)
    return list(ways.items())


def _group(
    how: SubgroupPlan,
    readings: StreamReadings,
    edges: tuple[int, int],
    request: Request,
    baseline: BaselinePlan | None = None,
) -> GroupedStream | None:
    found = group(
        how,
        readings,
        fit_to=edges[0],
        prove_from=edges[1],
        left_out=_causes(readings, request),
        baseline=baseline,
    )
    return found if found is not None and found.prove < len(found) and found.fit > 1 else None


def _theirs(
    plan: CharacteristicPlan,
    how: SubgroupPlan,
    streams: Sequence[StreamReadings],
    edges: tuple[int, int],
    request: Request,
) -> Grouped | None:
    found = []
    for each in streams:
        judgement = plan.judgement_of(each.stream)
        if judgement is None:
            return None
        one = _group(how, each, edges, request, judgement.baseline)
        if one is None:
            return None
        found.append(one)
    return Grouped(how, _size(how, found), tuple(found))


def _size(how: SubgroupPlan, streams: Sequence[GroupedStream]) -> int:
    if isinstance(how, ByCount):
        return how.size
    return int(np.median(np.concatenate([each.n for each in streams])))


def _said(how: SubgroupPlan, size: int) -> str:
    if not isinstance(how, ByCount):
        return f"windows of {format_duration(how.window)}, usually {size} readings"
    readings = "single readings" if size == 1 else f"subgroups of {size}"
    return readings if how.every is None else f"{readings} every {format_duration(how.every)}"


def _hold(
    ours: Grouped, theirs: Grouped | None, asked: bool, running: Running, request: Request
) -> Held:
    streams = ours.streams
    proof = sum(len(each) - each.prove for each in streams)
    seconds = (1 - PROVE) * running.whole
    rate = proof / seconds
    interval = request.promise * rate
    error = float(np.median([np.median(each.error) for each in streams]))
    readings = sum(len(each.readings.value) for each in streams) / sum(map(len, streams))
    wander, correlation = wandering.kept(streams)
    found = Grouping(
        size=ours.size,
        said=_said(ours.plan, ours.size),
        fit=ours.fit,
        proof=ours.proof,
        rate=rate,
        correlation=correlation,
        wander=wander,
        supports=FAR * ours.proof / rate,
        baselines=tuple(_baseline(each) for each in streams),
    )
    textbook = Textbook(
        error,
        interval / len(streams),
        min(request.ignore),
        readings,
        len(streams) / rate,
    )
    return Held(ours.plan, ours, theirs, asked, found, interval, textbook)


def _baseline(stream: GroupedStream) -> Baseline:
    return Baseline(
        stream_names.name(stream.readings.stream),
        stream.centre,
        stream.sigma,
        stream.between,
        float(stream.mean[stream.prove :].mean()),
    )
