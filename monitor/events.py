"""Alert events as other programs and people receive them.

Knows the fields of an event and where each is found. Must not know when an alert is raised or
closed.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Protocol

from monitor import text, times, units
from monitor.messages import (
    SCHEMA,
    AlertEvent,
    EventKind,
    ShiftField,
    SignalField,
    SubgroupField,
)
from monitor.plan import DetectorPlan, Direction, Judged, Stream
from monitor.subgroups import Subgroup
from monitor.text import Finding

_PLACEHOLDER = re.compile(r"\{([^{}]+)\}")


class Told(Protocol):
    """What an event needs to know of its alert."""

    id: str
    detector: DetectorPlan
    rule: str
    direction: Direction | None
    finding: Finding

    def met(self) -> Iterable[SignalField]:
        """The rules met so far, in the order they were first met."""


def event(
    judged: Judged,
    alert: Told,
    kind: EventKind,
    sequence: int,
    at: int,
    subgroup: Subgroup | None,
    reason: str | None = None,
) -> AlertEvent:
    """An event in the life of ``alert`` at event time ``at``; ``reason`` where it was withdrawn."""
    plan, baseline, tolerance = judged.plan, judged.baseline, judged.plan.specification
    signal = alert.finding.signal
    return AlertEvent(
        schema=SCHEMA,
        id=alert.id,
        sequence=sequence,
        event=kind,
        characteristic=plan.name,
        title=plan.title,
        stream=dict(judged.stream),
        time=times.format_time(at),
        detector=alert.detector.name,
        chart=alert.detector.scheme.chart,
        rule=alert.rule,
        direction=alert.direction,
        priority=plan.priority.of(alert.direction),
        text=text.sentence(judged, kind, alert.finding, at, reason),
        statistic={
            "name": signal.statistic,
            "value": signal.value,
            "lower": signal.lower,
            "upper": signal.upper,
            "unit": units.of_chart(alert.detector.scheme.chart, plan.unit),
        },
        signals=[SignalField(**known) for known in alert.met()],
        subgroup=None if subgroup is None else subgroup_field(subgroup),
        shift=_shift_field(alert.finding, plan.unit),
        specification=None
        if tolerance is None
        else {
            "nominal": tolerance.nominal,
            "lower": tolerance.lower,
            "upper": tolerance.upper,
        },
        baseline={
            "revision": baseline.revision,
            "mean": baseline.mean,
            "sigma": baseline.sigma,
        },
        reaction=[_filled(step, judged.stream) for step in plan.reaction.of(alert.direction)],
        caution=text.CAUTION,
        reason=reason,
    )


def _shift_field(finding: Finding, unit: str) -> ShiftField | None:
    shift = finding.shift
    if shift is None:
        return None
    earliest = shift.earliest
    return ShiftField(
        estimate=shift.size,
        unit=unit,
        onset=times.format_time(shift.onset),
        onset_from=None if earliest is None else times.format_time(earliest),
        onset_to=times.format_time(shift.latest),
    )


def subgroup_field(subgroup: Subgroup) -> SubgroupField:
    """A subgroup as messages show it; a single reading has no range and no standard deviation."""
    return SubgroupField(
        number=subgroup.number,
        size=subgroup.size,
        mean=subgroup.mean,
        range=subgroup.range,
        sd=subgroup.sd,
        first=times.format_time(subgroup.first),
        last=times.format_time(subgroup.last),
    )


def _filled(step: str, stream: Stream) -> str:
    # One pass, and not str.format: a value from a gauge is never a placeholder or a format code.
    values = dict(stream)
    return _PLACEHOLDER.sub(lambda found: values.get(found[1], found[0]), step)
