"""The life of a stream's alerts: raised, updated, rejoined, returned to normal, withdrawn.

Knows slots, signals and event time. Must not know detectors' states, topics or a clock. Life cycle
as in IEC 62682; what is decided here is decided at subgroups, in event time.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, fields
from functools import partial
from hashlib import sha256
from typing import Any

import rfc8785

from monitor import events, times
from monitor.detectors import Signal
from monitor.detectors.charts import standard_error
from monitor.lookback import LookBack, Shift
from monitor.messages import AlertEvent, EventKind, OpenField, SignalField
from monitor.plan import DetectorPlan, Direction, Judged
from monitor.subgroups import Subgroup
from monitor.text import Finding

RETURN_INTERVAL = 5.0
"""Decision interval of the return test, in standard errors."""

_SMALLEST_REFERENCE = 0.5


@dataclass(slots=True)
class Slot:
    """The one alert a stream may have open in a direction, or on a chart for signals without."""

    id: str
    detector: DetectorPlan
    rule: str
    direction: Direction | None
    raised: int
    finding: Finding
    signals: dict[tuple[str, str], SignalField] = field(default_factory=dict)
    open: bool = True
    text: str = ""
    last_signal: int = 0
    returned: int = 0
    shift: float = math.inf
    towards: float = 0.0
    quiet: int = 0
    quiet_needed: int = 0

    def met(self) -> Iterable[SignalField]:
        """The rules met so far, in the order they were first met."""
        return self.signals.values()

    def state(self) -> dict[str, Any]:
        """As JSON values, the detector by its name."""
        values = {name: getattr(self, name) for name in _PLAIN}
        signal, chart, shift, error = self.finding
        return values | {
            "detector": self.detector.name,
            "finding": [list(signal), chart, None if shift is None else list(shift), error],
            "signals": [dict(known) for known in self.signals.values()],
        }

    @classmethod
    def restored(cls, state: Mapping[str, Any], detectors: Mapping[str, DetectorPlan]) -> Slot:
        """From what ``state`` gave."""
        signal, chart, shift, error = state["finding"]
        met: list[SignalField] = state["signals"]
        return cls(
            **{name: state[name] for name in _PLAIN},
            detector=detectors[state["detector"]],
            finding=Finding(
                Signal(*signal), chart, None if shift is None else Shift(*shift), error
            ),
            signals={(known["detector"], known["rule"]): SignalField(**known) for known in met},
        )

    def signalled(self, finding: Finding, time: int) -> None:
        """The condition is there: every return test starts again."""
        self.finding = finding
        self.last_signal = time
        self.towards = 0.0
        self.quiet = 0
        self.quiet_needed = max(self.quiet_needed, 2 * finding.signal.span)
        shift = finding.shift
        # The smallest estimate so far: those at a signal are rather too large than too small, and a
        # shift that grew and is half repaired is not over.
        self.shift = min(self.shift, 0.0 if shift is None else shift.size * _sign(self.direction))

    def is_back(self, z: float, error: float, time: int, off_delay: int) -> bool:
        """Whether a subgroup without a signal completes the return: ``z`` is its mean in standard
        errors of ``error`` each.

        With a direction: a CUSUM towards the baseline (E. S. Page 1954) whose reference lies
        half-way between the baseline and the shift. Without: twice the rule's span without a
        signal.
        """
        if self.direction is None:
            self.quiet += 1
            back = self.quiet >= self.quiet_needed
        else:
            reference = max(_SMALLEST_REFERENCE, self.shift / error / 2.0)
            towards = self.towards + reference - z * _sign(self.direction)
            # Held just above the interval, so that what was gathered before off_delay can be lost.
            self.towards = min(max(0.0, towards), RETURN_INTERVAL + reference)
            back = self.towards > RETURN_INTERVAL
        return back and time - self.last_signal >= off_delay


_PLAIN = tuple(
    each.name for each in fields(Slot) if each.name not in ("detector", "finding", "signals")
)


class Numbering:
    """Counts the events of one characteristic and stream, from 1."""

    __slots__ = ("value",)

    def __init__(self) -> None:
        self.value = 0

    def next(self) -> int:
        """The number of the next event."""
        self.value += 1
        return self.value


class StreamAlerts:
    """All alerts of one stream, and the counter of their events."""

    __slots__ = ("_judged", "_sequence", "_slots")

    def __init__(self, judged: Judged, sequence: Numbering) -> None:
        self._judged = judged
        self._sequence = sequence
        self._slots: dict[str, Slot] = {}

    @property
    def is_quiet(self) -> bool:
        """Whether nothing is open or may rejoin, so that a subgroup without a signal is nothing."""
        return not self._slots

    def judge(
        self,
        subgroup: Subgroup,
        z: float,
        signals: list[tuple[DetectorPlan, Signal]],
        lookback: LookBack,
    ) -> list[AlertEvent]:
        """The events that a subgroup and its signals cause; most subgroups cause none."""
        caused: list[AlertEvent] = []
        error = standard_error(self._judged.baseline, subgroup.size)
        by_slot: dict[str, list[tuple[DetectorPlan, Signal]]] = {}
        for detector, signal in signals:
            key: str = signal.direction or detector.scheme.chart
            by_slot.setdefault(key, []).append((detector, signal))
        for name, slot in self._slots.items():
            if not slot.open or name in by_slot:
                continue
            if slot.is_back(z, error, subgroup.last, self._judged.plan.off_delay):
                slot.open, slot.returned = False, subgroup.last
                caused.append(self._event(slot, "returned-to-normal", subgroup.last, subgroup))
                if slot.direction is not None:
                    lookback.forget(slot.direction)
        for name, met in by_slot.items():
            event = self._signalled(name, met, subgroup, error, lookback)
            if event is not None:
                caused.append(event)
        time = subgroup.last
        self._slots = {n: slot for n, slot in self._slots.items() if not self._is_past(slot, time)}
        return caused

    def _signalled(
        self,
        key: str,
        met: list[tuple[DetectorPlan, Signal]],
        subgroup: Subgroup,
        error: float,
        lookback: LookBack,
    ) -> AlertEvent | None:
        time = subgroup.last
        slot = self._slots.get(key)
        direction = met[0][1].direction
        errors = partial(standard_error, self._judged.baseline)
        shift = None if direction is None else lookback.shift(direction, errors)
        findings = [(by, Finding(each, by.scheme.chart, shift, error)) for by, each in met]
        detector, telling = findings[0]
        kind: EventKind | None = None
        if slot is None or self._is_past(slot, time):
            kind = "raised"
            self._slots.pop(key, None)  # the new one takes its place at the end
            slot = self._slots[key] = Slot(
                self._identify(detector, telling.signal, subgroup),
                detector,
                telling.signal.rule,
                telling.signal.direction,
                time,
                telling,
            )
        elif not slot.open:
            kind = "rejoined"
            slot.open = True
        for by, finding in findings:
            rule = finding.signal.rule
            known = slot.signals.get((by.name, rule))
            if known is None:
                slot.signals[by.name, rule] = SignalField(
                    detector=by.name, rule=rule, time=times.format_time(time), count=1
                )
                if kind is None:
                    kind, telling = "updated", finding
            else:
                known["count"] += 1
            slot.signalled(finding, time)
        slot.finding = telling
        return None if kind is None else self._event(slot, kind, time, subgroup)

    def _is_past(self, slot: Slot, time: int) -> bool:
        """Whether it has returned for so long that a signal would begin another."""
        return not slot.open and time - slot.returned > self._judged.plan.rejoin

    def withdraw(self, time: int, reason: str) -> list[AlertEvent]:
        """Close all that is open, for a reason that is not the process's."""
        caused = [
            self._event(slot, "withdrawn", time, None, reason)
            for slot in self._slots.values()
            if slot.open
        ]
        self._slots.clear()
        return caused

    def open(self) -> list[OpenField]:
        """What is open now, in the order it was raised."""
        return [
            OpenField(
                id=slot.id,
                rule=slot.rule,
                direction=slot.direction,
                priority=self._judged.plan.priority.of(slot.direction),
                since=times.format_time(slot.raised),
                text=slot.text,
            )
            for slot in self._slots.values()
            if slot.open
        ]

    def _identify(self, detector: DetectorPlan, signal: Signal, subgroup: Subgroup) -> str:
        canonical = rfc8785.dumps(
            [
                1,
                self._judged.plan.name,
                dict(self._judged.stream),
                detector.name,
                signal.rule,
                detector.revision,
                # As text: canonical JSON has no integers beyond 2^53.
                [None if part is None else str(part) for part in subgroup.identity],
            ]
        )
        return sha256(canonical).hexdigest()[:32]

    def _event(
        self,
        slot: Slot,
        kind: EventKind,
        time: int,
        subgroup: Subgroup | None,
        reason: str | None = None,
    ) -> AlertEvent:
        number = self._sequence.next()
        told = events.event(self._judged, slot, kind, number, time, subgroup, reason)
        slot.text = told["text"]
        return told

    def reconfigure(self, judged: Judged, time: int) -> list[AlertEvent]:
        """Another plan is in force: what a detector raised that is no more, or decides otherwise
        now, is withdrawn."""
        self._judged = judged
        judgement = judged.plan.judgement_of(judged.stream)
        detectors = {} if judgement is None else {d.name: d for d in judgement.detectors}
        caused = []
        for key, slot in list(self._slots.items()):
            detector = detectors.get(slot.detector.name)
            if detector is not None and detector.revision == slot.detector.revision:
                slot.detector = detector
                continue
            del self._slots[key]
            if slot.open:
                caused.append(self._event(slot, "withdrawn", time, None, "configuration"))
        return caused

    def state(self) -> dict[str, Any]:
        """Every slot, as JSON values; detectors by name."""
        return {key: slot.state() for key, slot in self._slots.items()}

    def restore(self, state: Mapping[str, Any], detectors: Mapping[str, DetectorPlan]) -> None:
        """Take back what ``state`` gave; ``detectors`` are the plan's, by name."""
        self._slots = {key: Slot.restored(slot, detectors) for key, slot in state.items()}


def _sign(direction: Direction | None) -> int:
    return -1 if direction == "down" else 1
