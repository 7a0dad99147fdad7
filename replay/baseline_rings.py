"""How often the configured detectors ring on the very recording that a baseline was taken from.

Knows the engine's streams and chance. Must not know how a baseline is estimated, or words for
people.

Run lengths are worked out for normal readings; this counts what tails, skewness and memory within a
subgroup make of them. Centre and spread come from the same readings, so it flatters a little: many
alerts speak against a promise, few prove nothing.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from monitor.alerts import Numbering
from monitor.methods import chi_square
from monitor.outputs import Alert
from monitor.plan import CharacteristicPlan, Direction, Judgement, Stream
from monitor.stream import Counts, StreamState
from replay.readings import StreamReadings
from replay.tuning.grouped import GroupedStream, group
from replay.tuning.hearing import RINGS, one_by_one

_LEAST = 3
"""One event may ring on its mean and again on its spread."""
_RARE = 0.01


@dataclass(frozen=True, slots=True)
class Ring:
    """The crew hears something: at the end of a subgroup (event time, µs), from the detector and
    rule that opened the alert. ``stranger``: the subgroup was left out of the estimate because it
    lay outside."""

    stream: Stream
    time: int
    detector: str
    rule: str
    direction: Direction | None
    stranger: bool


@dataclass(frozen=True, slots=True)
class Rung:
    """All ``rings`` in order of time, of so many ``subgroups`` of all streams, where ``expected``
    are promised."""

    rings: tuple[Ring, ...]
    subgroups: int
    expected: float

    @property
    def chance(self) -> float:
        """Of so many or more, were the promise kept: a tail of Poisson's distribution, which is one
        of chi-squared (F. Garwood 1936, Biometrika 28)."""
        return chi_square.cdf(2 * self.expected, 2 * len(self.rings)) if self.rings else 1.0

    @property
    def too_many(self) -> bool:
        """Whether that is no accident."""
        return len(self.rings) >= _LEAST and self.chance < _RARE

    @property
    def kept(self) -> float:
        """The part of the promised interval that so many rings leave, 1 being all of it."""
        return min(1.0, self.expected / len(self.rings)) if self.rings else 1.0

    @property
    def by_detector(self) -> Mapping[str, int]:
        """Rings of each detector, the most first."""
        return dict(Counter(ring.detector for ring in self.rings).most_common())

    @property
    def strangers(self) -> int:
        """Rings at subgroups that were left out because they lay outside."""
        return sum(ring.stranger for ring in self.rings)


def listen(
    plan: CharacteristicPlan,
    readings: Sequence[StreamReadings],
    without: Sequence[tuple[int, int]],
    strangers: Collection[tuple[Stream, int]],
    interval: float,
    unknown: Collection[str] = (),
) -> Rung:
    """Every stream through the engine, held against the baseline in ``plan``.

    Subgroups within the spans ``without`` (µs) never reach it: their cause is known. ``strangers``
    do, by stream and time: they came from the line, and so will others. ``interval`` is promised,
    in subgroups of all streams, by all detectors but the ``unknown`` ones, which do not take part.
    An alert that has returned to normal and rings again rings twice.
    """
    plan = _held(plan, unknown)
    rings: list[Ring] = []
    subgroups = 0
    for each in readings:
        judgement = plan.judgement_of(each.stream)
        if judgement is None:
            continue
        grouped = group(
            plan.subgroup,
            each,
            fit_to=0,
            prove_from=0,
            left_out=without,
            baseline=judgement.baseline,
        )
        if grouped is None or not len(grouped):
            continue
        subgroups += len(grouped) - int(grouped.left_out.sum())
        rings += _rings(plan, grouped, strangers)
    rings.sort(key=lambda ring: (ring.time, ring.stream))
    return Rung(tuple(rings), subgroups, subgroups / interval)


def _held(plan: CharacteristicPlan, unknown: Collection[str]) -> CharacteristicPlan:
    """What is learned on the way would judge by another baseline."""

    def known(judgement: Judgement) -> Judgement:
        detectors = tuple(each for each in judgement.detectors if each.name not in unknown)
        return Judgement(judgement.baseline, detectors)

    return replace(
        plan,
        learn=None,
        judgement=plan.judgement and known(plan.judgement),
        by_stream={stream: known(own) for stream, own in plan.by_stream.items()},
    )


def _rings(
    plan: CharacteristicPlan, grouped: GroupedStream, strangers: Collection[tuple[Stream, int]]
) -> Iterator[Ring]:
    stream, left_out = grouped.readings.stream, grouped.left_out.tolist()
    counts = Counts()
    state = StreamState(plan, stream, int(grouped.readings.time[0]), counts, Numbering())
    broken = restarted = False
    for at, subgroup, restarts in one_by_one(plan.subgroup, grouped):
        broken |= subgroup.broken
        restarted |= restarts
        if left_out[at]:
            broken = True
            continue
        subgroup.broken = broken
        outputs = state.gauge_restarted(subgroup.first, counts) if restarted else []
        outputs = [*outputs, *state.judge(subgroup, counts, points=False)]
        broken = restarted = False
        for output in outputs:
            if isinstance(output, Alert) and output.event["event"] in RINGS:
                event = output.event
                yield Ring(
                    stream,
                    subgroup.last,
                    event["detector"],
                    event["rule"],
                    event["direction"],
                    (stream, subgroup.last) in strangers,
                )
