"""The life of a stream's alerts: raised, updated, rejoined, returned to normal, withdrawn.

Knows slots, signals and event time. Must not know detectors' states, topics or a clock. Life cycle
as in IEC 62682; what is decided here is decided at subgroups, in event time.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field
from hashlib import sha256

import rfc8785

from monitor import text, times
from monitor.detectors import Signal
from monitor.detectors.charts import standard_error
from monitor.lookback import LookBack, Shift
from monitor.messages import (
    SCHEMA,
    AlertEvent,
    EventKind,
    OpenField,
    SignalField,
    SubgroupField,
)
from monitor.outputs import Stream
from monitor.plan import CharacteristicPlan, DetectorPlan, Direction
from monitor.subgroups import Subgroup

RETURN_INTERVAL = 5.0
"""Decision interval of the return test, in standard errors."""

_SMALLEST_REFERENCE = 0.5
_PLACEHOLDER = re.compile(r"\{([^{}]+)\}")


@dataclass(slots=True)
class Slot:
    """The one alert a stream may have open in a direction, or on a chart for signals without."""

    id: str
    detector: DetectorPlan
    rule: str
    direction: Direction | None
    raised: int
    signal: Signal
    signals: dict[tuple[str, str], SignalField] = field(default_factory=dict)
    shift: Shift | None = None
    open: bool = True
    text: str = ""
    last_signal: int = 0
    returned: int = 0
    reference: float = math.inf
    towards: float = 0.0
    quiet: int = 0
    quiet_needed: int = 0

    def signalled(self, signal: Signal, time: int, shift: Shift | None) -> None:
        """The condition is there: every return test starts again."""
        self.signal = signal
        self.shift = shift
        self.last_signal = time
        self.towards = 0.0
        self.quiet = 0
        self.quiet_needed = max(self.quiet_needed, 2 * signal.span)
        size = 0.0 if shift is None else shift.size * _sign(self.direction)
        # The smallest estimate so far: those at a signal are rather too large than too small, and a
        # shift that grew and is half repaired is not over.
        self.reference = min(self.reference, max(_SMALLEST_REFERENCE, size / 2.0))

    def is_back(self, z: float, time: int, off_delay: int) -> bool:
        """Whether a subgroup without a signal, standardised mean ``z``, completes the return.

        With a direction: a CUSUM towards the baseline (E. S. Page 1954) whose reference lies
        half-way between the baseline and the shift. Without: twice the rule's span without a
        signal.
        """
        if self.direction is None:
            self.quiet += 1
            back = self.quiet >= self.quiet_needed
        else:
            towards = self.towards + self.reference - z * _sign(self.direction)
            # Held just above the interval, so that what was gathered before off_delay can be lost.
            self.towards = min(max(0.0, towards), RETURN_INTERVAL + self.reference)
            back = self.towards > RETURN_INTERVAL
        return back and time - self.last_signal >= off_delay


class StreamAlerts:
    """All alerts of one stream, and the counter of their events."""

    __slots__ = ("_plan", "_slots", "_stream", "sequence")

    def __init__(self, plan: CharacteristicPlan, stream: Stream) -> None:
        self._plan = plan
        self._stream = stream
        self._slots: dict[str, Slot] = {}
        self.sequence = 0

    def judge(
        self,
        subgroup: Subgroup,
        z: float,
        signals: list[tuple[DetectorPlan, Signal]],
        lookback: LookBack,
    ) -> list[AlertEvent]:
        """The events that a subgroup and its signals cause; most subgroups cause none."""
        if not signals and not self._slots:
            return []
        events: list[AlertEvent] = []
        by_slot: dict[str, list[tuple[DetectorPlan, Signal]]] = {}
        for detector, signal in signals:
            key: str = signal.direction or detector.scheme.chart
            by_slot.setdefault(key, []).append((detector, signal))
        for name, slot in self._slots.items():
            if not slot.open or name in by_slot:
                continue
            if slot.is_back(z, subgroup.last, self._plan.off_delay):
                slot.open, slot.returned = False, subgroup.last
                events.append(self._event(slot, "returned-to-normal", subgroup))
                if slot.direction is not None:
                    lookback.forget(slot.direction)
        for name, met in by_slot.items():
            event = self._signalled(name, met, subgroup, lookback)
            if event is not None:
                events.append(event)
        return events

    def _signalled(
        self,
        key: str,
        met: list[tuple[DetectorPlan, Signal]],
        subgroup: Subgroup,
        lookback: LookBack,
    ) -> AlertEvent | None:
        time = subgroup.last
        slot = self._slots.get(key)
        kind: EventKind | None = None
        detector, signal = met[0]
        if slot is None or (not slot.open and time - slot.returned > self._plan.rejoin):
            kind = "raised"
            self._slots.pop(key, None)  # the new one takes its place at the end
            slot = self._slots[key] = Slot(
                self._identify(detector, signal, subgroup),
                detector,
                signal.rule,
                signal.direction,
                time,
                signal,
            )
        elif not slot.open:
            kind = "rejoined"
            slot.open = True
        shift = None if slot.direction is None else lookback.shift(slot.direction)
        for by, each in met:
            known = slot.signals.get((by.name, each.rule))
            if known is None:
                slot.signals[by.name, each.rule] = SignalField(
                    detector=by.name, rule=each.rule, time=times.format_time(time), count=1
                )
                if kind is None:
                    kind, detector, signal = "updated", by, each
            else:
                known["count"] += 1
            slot.signalled(each, time, shift)
        slot.signal = signal
        return (
            None if kind is None else self._event(slot, kind, subgroup, chart=detector.scheme.chart)
        )

    def withdraw(self, time: int, reason: str) -> list[AlertEvent]:
        """Close all that is open, for a reason that is not the process's."""
        events = [
            self._event(slot, "withdrawn", None, reason=reason, time=time)
            for slot in self._slots.values()
            if slot.open
        ]
        self._slots.clear()
        return events

    def open(self) -> list[OpenField]:
        """What is open now, in the order it was raised."""
        return [
            OpenField(
                id=slot.id,
                rule=slot.rule,
                direction=slot.direction,
                priority=self._plan.priority.of(slot.direction),
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
                self._plan.name,
                dict(self._stream),
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
        subgroup: Subgroup | None,
        *,
        chart: str | None = None,
        reason: str | None = None,
        time: int = 0,
    ) -> AlertEvent:
        plan, signal = self._plan, slot.signal
        at = subgroup.last if subgroup else time
        self.sequence += 1
        slot.text = text.sentence(
            plan,
            self._stream,
            kind,
            signal,
            chart or slot.detector.scheme.chart,
            slot.shift,
            at,
            reason,
        )
        tolerance, baseline = plan.specification, plan.baseline
        return AlertEvent(
            schema=SCHEMA,
            id=slot.id,
            sequence=self.sequence,
            event=kind,
            characteristic=plan.name,
            title=plan.title,
            stream=dict(self._stream),
            time=times.format_time(at),
            detector=slot.detector.name,
            chart=slot.detector.scheme.chart,
            rule=slot.rule,
            direction=slot.direction,
            priority=plan.priority.of(slot.direction),
            text=slot.text,
            statistic={
                "name": signal.statistic,
                "value": signal.value,
                "lower": signal.lower,
                "upper": signal.upper,
                "unit": plan.unit,
            },
            signals=[SignalField(**known) for known in slot.signals.values()],
            subgroup=None if subgroup is None else subgroup_field(subgroup),
            shift=None
            if slot.shift is None
            else {
                "estimate": slot.shift.size * standard_error(baseline, plan.subgroup.size),
                "unit": plan.unit,
                "onset": times.format_time(slot.shift.onset),
                "onset_from": None
                if slot.shift.earliest is None
                else times.format_time(slot.shift.earliest),
                "onset_to": times.format_time(slot.shift.latest),
            },
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
            reaction=[_filled(step, self._stream) for step in plan.reaction.of(slot.direction)],
            caution=text.CAUTION,
            reason=reason,
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


def _sign(direction: Direction | None) -> int:
    return -1 if direction == "down" else 1


def _filled(step: str, stream: Stream) -> str:
    # One pass, and not str.format: a value from a gauge is never a placeholder or a format code.
    values = dict(stream)
    return _PLACEHOLDER.sub(lambda found: values.get(found[1], found[0]), step)
