"""One alert, derived again: its life, what it was judged by, and the points that made it ring.

Knows the journal's past, the engine and the arithmetic. Must not know how it is told.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

from monitor import history, judging, messages, times
from monitor.engine import Engine
from monitor.entries import State
from monitor.excerpt import excerpt
from monitor.explaining import alert_log
from monitor.explaining.alert_log import Occurrence
from monitor.explaining.evidence import Kept
from monitor.explaining.evidence_working import from_evidence
from monitor.explaining.working import Rung, Working, agreement, from_points
from monitor.journal import JournalError
from monitor.messages import AlertEvent
from monitor.outputs import Alert, Points
from monitor.plan import CharacteristicPlan, DetectorPlan, Judgement, Plan, Stream
from monitor.solving import UnsolvableError

_FURTHER = 5  # subgroups after the one that rang
_PATIENCE = 20_000  # entries in which they are looked for
_OVER = ("returned-to-normal", "withdrawn")


@dataclass(frozen=True, slots=True)
class Explanation:
    """An alert and why it rang. ``plan`` was in force then; its judgement is the stream's own.

    ``events`` are those that the journal still has, ``told`` is the one that is explained: that
    which raised it, if it is there. ``source`` is where the working comes from. ``agrees`` says
    whether it ends where the alert does; where entries are the source, whether they gave the whole
    alert again. ``working`` and ``agrees`` are None for an alert about the gauge.
    """

    events: tuple[AlertEvent, ...]
    told: AlertEvent
    plan: CharacteristicPlan
    detector: DetectorPlan | None
    unchanged: bool | None
    """Whether the newest configuration judges alike; None where that is not known."""
    source: Literal["entries", "evidence"]
    working: Working | None
    agrees: str | None

    @property
    def is_open(self) -> bool:
        """Whether the alert was open after its newest event."""
        return self.events[-1]["event"] not in _OVER

    @property
    def judgement(self) -> Judgement | None:
        """The baseline and the detectors of the stream."""
        return self.plan.judgement


def explain(
    db: sqlite3.Connection, wanted: str, folding: Callable[[], None] = lambda: None
) -> Explanation:
    """The alert whose id begins with ``wanted``; ``folding`` is called for each entry on the way.

    NoSuchAlertError where that is not one alert, ValueError where it was kept by another version.
    """
    life = alert_log.life(db, wanted)
    told = next((each for each in life if each.event["event"] == "raised"), life[0])
    kept, event = told.kept(), told.event
    judgement = kept.plan.judgement
    detectors = () if judgement is None else judgement.detectors
    detector = next((each for each in detectors if each.name == event["detector"]), None)
    rung = None
    if judgement is not None and detector is not None:
        rung = Rung.of(event, detector, judgement.baseline)
    again = _again(db, told, kept, folding)
    working = None if again is None or rung is None else from_points(again.points, rung)
    source: Literal["entries", "evidence"] = "evidence" if again is None else "entries"
    if working is None and rung is not None:
        working, source = from_evidence(kept.evidence, rung), "evidence"
    agrees = None if working is None or rung is None else agreement(working, rung)
    if source == "entries" and again is not None and not again.is_equal:
        agrees = "no"
    return Explanation(
        tuple(each.event for each in life),
        event,
        kept.plan,
        detector,
        _is_unchanged(db, kept.plan, detector, _stream(event)),
        source,
        working,
        agrees,
    )


@dataclass(frozen=True, slots=True)
class _Again:
    """What the entries gave: the stream's points, and whether the event came to the byte."""

    points: tuple[Points, ...]
    is_equal: bool


def _again(
    db: sqlite3.Connection, told: Occurrence, kept: Kept, folding: Callable[[], None]
) -> _Again | None:
    """Fold what led to the event again; None where the entries are gone, or go meanwhile."""
    event, stream = told.event, _stream(told.event)
    name = event["characteristic"]
    # The gauge's clock need not be ours.
    ahead = told.time - times.parse_iso_time(event["time"])
    since = min([told.time, *(first + ahead for first in kept.evidence.first[:1])])
    engine = Engine(Plan(()), points=True)
    points: list[Points] = []
    is_equal: bool | None = None
    further = late = 0
    try:
        for entry in excerpt(history.recorded(db, since, folding=folding), name):
            folding()
            if isinstance(entry, State):
                if entry.time >= told.time:
                    return None
                engine = Engine(entry.plan, points=True)
                engine.restore(entry.engine, entry.streams)
                continue
            for output in engine.fold(entry):
                if isinstance(output, Points) and _is_of(output, name, stream):
                    points.append(output)
                    further += is_equal is not None
                elif isinstance(output, Alert) and _is(output.event, event):
                    is_equal = messages.encode(output.event) == told.text
            late += entry.time > told.time
            if further >= _FURTHER or late > _PATIENCE:
                break
    except JournalError:
        return None
    return _Again(tuple(points), is_equal is True)


def _is(one: AlertEvent, other: AlertEvent) -> bool:
    return (one["id"], one["sequence"]) == (other["id"], other["sequence"])


def _is_of(points: Points, name: str, stream: Stream) -> bool:
    return points.characteristic.name == name and points.stream == stream


def _stream(event: AlertEvent) -> Stream:
    return tuple(sorted(event["stream"].items()))


def _is_unchanged(
    db: sqlite3.Connection, then: CharacteristicPlan, detector: DetectorPlan | None, stream: Stream
) -> bool | None:
    newest = history.plan_in_force(db)
    if newest is None or detector is None:
        return None
    judgements = [
        judgement
        for each in newest.characteristics
        if each.name == then.name
        for judgement in (each.judgement_of(stream), _adopted(each, then.judgement_of(stream)))
    ]
    return any(
        judgement is not None
        and any(
            each.revision == detector.revision
            for each in judgement.detectors
            if each.name == detector.name
        )
        for judgement in judgements
    )


def _adopted(now: CharacteristicPlan, then: Judgement | None) -> Judgement | None:
    """What is judged by where streams adopt what they learn: the baseline that was in force goes
    on. None where they do not, or it is too little for today's detectors."""
    if now.learn is None or not now.learn.adopt or then is None:
        return None
    baseline = then.baseline
    values = baseline.mean, baseline.sigma, baseline.sigma_between
    try:
        return judging.judgement(*values, now.learn.detectors)
    except UnsolvableError:
        return None
