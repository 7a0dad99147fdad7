"""What the configured detectors ring together, as the engine rings it: alerts, not signals.

Knows subgroups and the engine's streams. Must not know settings, intervals or words.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from monitor.alerts import Numbering
from monitor.outputs import Alert
from monitor.plan import CharacteristicPlan, Direction, SubgroupPlan
from monitor.stream import Counts, StreamState
from monitor.subgroups import Subgroup
from replay.readings import Times
from replay.subgrouping import spans
from replay.tuning.grouped import Grouped, GroupedStream

RINGS = ("raised", "rejoined")
"""Events of an alert that the crew hears."""
_ENDS = ("returned-to-normal", "withdrawn")


@dataclass(frozen=True, slots=True)
class Ring:
    """The crew hears something: at the end of subgroup ``at`` of the stream of that place."""

    stream: int
    at: int
    time: int
    direction: Direction | None


@dataclass(frozen=True, slots=True)
class Heard:
    """Of the last part, what labelled causes disturb left out: the ``rings`` in order of time, how
    many ``signals`` they came from, and in how many subgroups (``standing``) an alert was open.
    ``signalled`` are the instants (µs) of all signals of the whole recording, one array a stream.
    """

    rings: tuple[Ring, ...]
    signals: int
    standing: int
    signalled: tuple[Times, ...]


def hear(plan: CharacteristicPlan, grouped: Grouped) -> Heard:
    """Every stream of ``grouped`` through the engine, from its first reading on.

    An alert that has returned to normal and rings again rings twice, although it keeps its id.
    """
    # What is learned on the way would judge by another baseline than the rest of the result.
    plan = replace(plan, learn=None)
    rings: list[Ring] = []
    signals = standing = 0
    signalled: list[Times] = []
    for place, stream in enumerate(grouped.streams):
        state, counts = _stream(plan, stream)
        open_now = 0
        instants: list[int] = []
        for at, subgroup, restarts in one_by_one(grouped.plan, stream):
            before = counts.signals
            outputs = state.gauge_restarted(subgroup.first, counts) if restarts else []
            outputs = [*outputs, *state.judge(subgroup, counts, points=False)]
            counts_here = at >= stream.prove and not stream.left_out[at]
            for output in outputs:
                if not isinstance(output, Alert):
                    continue
                kind = output.event["event"]
                open_now += (kind in RINGS) - (kind in _ENDS)
                if counts_here and kind in RINGS:
                    rings.append(Ring(place, at, subgroup.last, output.event["direction"]))
            more = counts.signals - before
            if more:
                instants.append(subgroup.last)
            if counts_here:
                signals += more
                standing += open_now > 0
        signalled.append(np.array(instants, np.int64))
    rings.sort(key=lambda ring: ring.time)
    return Heard(tuple(rings), signals, standing, tuple(signalled))


def _stream(plan: CharacteristicPlan, stream: GroupedStream) -> tuple[StreamState, Counts]:
    counts = Counts()
    first = int(stream.readings.time[0])
    return StreamState(plan, stream.readings.stream, first, counts, Numbering()), counts


def one_by_one(plan: SubgroupPlan, stream: GroupedStream) -> Iterator[tuple[int, Subgroup, bool]]:
    """Each subgroup with its place, and whether the gauge restarted before it."""
    readings = stream.readings
    broken = spans(plan, readings.time, readings.breaks).broken.tolist()
    restarts = set(stream.restarts.tolist())
    first = readings.time[stream.start].tolist()
    edges = zip(stream.start.tolist(), stream.stop.tolist(), strict=True)
    for at, (begin, end) in enumerate(edges):
        values = tuple(readings.value[begin:end].tolist())
        last = int(stream.last[at])
        size = end - begin
        mean = sum(values) / size if size > 1 else values[0]
        identity = (None, last, None, None)
        yield (
            at,
            Subgroup(at + 1, values, first[at], last, identity, broken[at], size, mean),
            at in restarts,
        )
