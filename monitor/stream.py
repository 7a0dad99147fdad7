"""One stream: everything that is remembered of it, and what a reading of it does.

Knows subgroups, detectors, alerts and their order. Must not know topics, payloads or other streams.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from monitor.alerts import Numbering, StreamAlerts
from monitor.detectors import Detector, Signal, detector
from monitor.detectors.charts import standard_error
from monitor.lookback import LookBack
from monitor.messages import AlertEvent
from monitor.outputs import Alert, Gone, Output, Points, Row
from monitor.plan import (
    ByWindow,
    CharacteristicPlan,
    DetectorPlan,
    Judged,
    Judgement,
    Stream,
)
from monitor.seen import StreamSeen
from monitor.stream_learning import StreamLearning
from monitor.subgroups import Subgroup, gatherer


@dataclass(slots=True)
class Counts:
    """What was taken in and given out since the first entry; ``set_aside`` by reason."""

    messages: int = 0
    readings: int = 0
    subgroups: int = 0
    abandoned: int = 0
    missing: int = 0
    signals: int = 0
    alerts: int = 0
    lag: int | None = None
    """Microseconds from the latest reading's own time to its arrival."""
    set_aside: dict[str, int] = field(default_factory=dict)

    def abandon(self) -> None:
        """A subgroup was given up unfinished."""
        self.abandoned += 1


class StreamState:
    """One stream of one characteristic; ``keys`` are its values in the order of their keys."""

    __slots__ = (
        "_error",
        "_size",
        "alerts",
        "detectors",
        "gatherer",
        "has_left",
        "judgement",
        "keys",
        "last",
        "learning",
        "lookback",
        "plan",
        "seen",
        "sequence",
        "since",
        "stream",
        "windowed",
    )

    def __init__(
        self,
        plan: CharacteristicPlan,
        stream: Stream,
        since: int,
        counts: Counts,
        numbers: Numbering,
    ) -> None:
        sequence = plan.source.sequence
        self.plan = plan
        self.stream = stream
        self.keys = tuple(value for _, value in stream)
        self.since = since
        self.has_left = False
        """Whether it is no longer in the configuration."""
        self.judgement: Judgement | None = plan.judgement_of(stream)
        self.learning = StreamLearning(plan.learn)
        self.seen = StreamSeen(sequence.wraps if sequence else None)
        self.gatherer = gatherer(plan.subgroup, counts.abandon)
        self.windowed = isinstance(plan.subgroup, ByWindow)
        self.detectors: list[tuple[DetectorPlan, Detector]] = []
        self.alerts: StreamAlerts | None = None
        self.sequence = numbers
        self._begin()
        self.lookback = LookBack()
        self.last: Subgroup | None = None
        self._size = 0
        self._error = 1.0

    def _begin(self) -> None:
        """Fresh detectors, where there is a baseline."""
        if self.judgement is not None:
            baseline = self.judgement.baseline
            self.detectors = [(p, detector(p, baseline)) for p in self.judgement.detectors]
            self.alerts = StreamAlerts(Judged(self.plan, self.stream, baseline), self.sequence)

    def close(self, counts: Counts, points: bool) -> Sequence[Output]:
        """The time of what was gathered has come; a reading from before it is late from now on."""
        end = self.gatherer.closes()
        if end is not None:
            self.seen.close(end)
        subgroup = self.gatherer.close()
        return [] if subgroup is None else self.judge(subgroup, counts, points)

    def gauge_restarted(self, time: int, counts: Counts) -> list[Output]:
        """The gauge counts afresh: what it sends does not continue what it sent."""
        self.gatherer.abandon()
        for _, each in self.detectors:
            each.restart()
        self.lookback.clear()
        self.learning.restart()
        return self._withdraw(time, "gauge-restart", counts)

    def leave(self, time: int, counts: Counts) -> list[Output]:
        """The stream is no longer in the configuration."""
        self.has_left = True
        return [
            *self._withdraw(time, "configuration", counts),
            Gone(self.plan.name, self.stream, self.learning.proposal is not None),
        ]

    def reconfigure(self, plan: CharacteristicPlan, time: int, counts: Counts) -> list[Output]:
        """Another plan is in force from now on; what decides as before goes on as before."""
        before, self.plan = self.plan, plan
        same_readings = plan.source == before.source and plan.subgroup == before.subgroup
        self.learning.reconfigure(plan.learn, same_readings)
        judgement = self._adopt()
        if not same_readings:
            self.gatherer.abandon()
            number, self.gatherer = self.gatherer.number, gatherer(plan.subgroup, counts.abandon)
            self.gatherer.number = number
            self.windowed = isinstance(plan.subgroup, ByWindow)
        if plan.source.sequence != before.source.sequence:
            sequence = plan.source.sequence
            self.seen = StreamSeen(sequence.wraps if sequence else None)
        return self._judge_anew(judgement, same_readings, time, counts)

    def _adopt(self) -> Judgement | None:
        """Be judged by what was learned, else by the plan; by what it was until now. Whoever asks
        the plan for this stream's judgement gets the same."""
        learned, before = self.learning.adopted, self.judgement
        if learned is not None:
            self.plan = replace(self.plan, by_stream={self.stream: learned})
        self.judgement = self.plan.judgement_of(self.stream)
        return before

    def _judge_anew(
        self, before: Judgement | None, same_readings: bool, time: int, counts: Counts
    ) -> list[Output]:
        """``judgement`` is another than ``before``; what decides as before goes on as before."""
        same_baseline = (
            before is not None
            and self.judgement is not None
            and before.baseline.revision == self.judgement.baseline.revision
        )
        if not (same_baseline and same_readings):
            self.lookback.clear()
            self._size = 0
        kept = {(each.name, each.revision): found for each, found in self.detectors}
        self.detectors = []
        if self.judgement is None:
            outputs = self._withdraw(time, "configuration", counts)
            self.alerts = None
            return outputs
        for each in self.judgement.detectors:
            goes_on = detector(each, self.judgement.baseline)
            if (each.name, each.revision) in kept:
                goes_on.restore(kept[each.name, each.revision].state())
            self.detectors.append((each, goes_on))
        judged = Judged(self.plan, self.stream, self.judgement.baseline)
        if self.alerts is None:
            self.alerts = StreamAlerts(judged, self.sequence)
        return self._told(self.alerts.reconfigure(judged, time), counts)

    def _withdraw(self, time: int, reason: str, counts: Counts) -> list[Output]:
        return [] if self.alerts is None else self._told(self.alerts.withdraw(time, reason), counts)

    def _told(self, events: list[AlertEvent], counts: Counts) -> list[Output]:
        if not events:
            return []
        counts.alerts += len(events)
        evidence = self.lookback.evidence()
        return [Alert(self.plan, self.stream, event, evidence) for event in events]

    def judge(self, subgroup: Subgroup, counts: Counts, points: bool) -> Sequence[Output]:
        """What a finished subgroup causes."""
        counts.subgroups += 1
        self.last = subgroup
        if self.learning.gathers and self.learning.take(self.plan, self.stream, subgroup):
            # From the next subgroup on: this one is part of what was learned.
            anew = self._judge_anew(self._adopt(), True, subgroup.last, counts)
            return [*anew, *self._unjudged(subgroup, points)]
        if self.judgement is None or self.alerts is None:
            return self._unjudged(subgroup, points)
        baseline = self.judgement.baseline
        if subgroup.size != self._size:
            self._size = subgroup.size
            self._error = standard_error(baseline, subgroup.size)
        z = (subgroup.mean - baseline.mean) / self._error
        self.lookback.append(z, subgroup.first, subgroup.size)
        signals: list[tuple[DetectorPlan, Signal]] = []
        rows: tuple[Row, ...] = ()
        for plan, each in self.detectors:
            met = each.step(subgroup)
            if met:
                signals += [(plan, signal) for signal in met]
            if points:
                rows += each.rows(plan.name, met)
        outputs: Sequence[Output] = ()
        if points:
            outputs = (Points(self.plan, self.stream, subgroup, rows),)
        if not signals and self.alerts.is_quiet:
            return outputs
        counts.signals += len(signals)
        events = self.alerts.judge(subgroup, z, signals, self.lookback)
        return [*outputs, *self._told(events, counts)] if events else outputs

    def _unjudged(self, subgroup: Subgroup, points: bool) -> Sequence[Output]:
        return [Points(self.plan, self.stream, subgroup, ())] if points else []

    def state(self) -> dict[str, Any]:
        """Everything remembered, as JSON values; detectors by name."""
        last = self.last
        return {
            "characteristic": self.plan.name,
            "stream": dict(self.stream),
            "since": self.since,
            "seen": self.seen.state(),
            "gatherer": self.gatherer.state(),
            "detectors": {plan.name: each.state() for plan, each in self.detectors},
            "lookback": self.lookback.state(),
            "sequence": self.sequence.value,
            "alerts": None if self.alerts is None else self.alerts.state(),
            "last": None if last is None else last.state(),
            "learning": self.learning.state(),
        }

    def restore(self, state: dict[str, Any]) -> None:
        """Take back what ``state`` gave under the same plan."""
        self.learning.restore(state["learning"])
        if self.learning.adopted is not None:
            self._adopt()
            self._begin()
        self.seen.restore(state["seen"])
        self.gatherer.restore(state["gatherer"])
        for plan, each in self.detectors:
            each.restore(state["detectors"][plan.name])
        self.lookback.restore(state["lookback"])
        self.sequence.value = state["sequence"]
        if self.alerts is not None:
            self.alerts.restore(state["alerts"], {plan.name: plan for plan, _ in self.detectors})
        self.last = None if state["last"] is None else Subgroup.restored(state["last"])
