"""Alerts about a characteristic's gauge and the way its readings reach us, not about the process.

Knows which rule is open and since when. Must not know streams, detectors or a clock.
"""

from __future__ import annotations

from hashlib import sha256
from typing import Any

import rfc8785

from monitor import text, times
from monitor.alerts import Numbering
from monitor.messages import SCHEMA, AlertEvent, EventKind, OpenField
from monitor.plan import CharacteristicPlan

DETECTOR = "gauge"

_WORDS = {
    "session-lost": (
        "the broker lost our session: readings of the time we were away may be missing",
        "readings arrive again",
    ),
}
RULES = tuple(_WORDS)
_LEFT = "no longer watched, because the configuration changed"
_FIRST = {
    "session-lost": "See whether the broker was restarted without its store, or expires sessions.",
}


class GaugeAlerts:
    """The open alerts of one characteristic, one a rule."""

    __slots__ = ("_open", "_plan", "_sequence")

    def __init__(self, plan: CharacteristicPlan, sequence: Numbering) -> None:
        self._plan = plan
        self._sequence = sequence
        self._open: dict[str, tuple[str, int]] = {}

    @property
    def is_open(self) -> bool:
        """Whether any rule is."""
        return bool(self._open)

    def met(self, rule: str, time: int) -> list[AlertEvent]:
        """The rule is met at arrival ``time``; raised once until it has ended."""
        if rule in self._open:
            return []
        canonical = rfc8785.dumps([1, self._plan.name, {}, DETECTOR, rule, str(time)])
        self._open[rule] = sha256(canonical).hexdigest()[:32], time
        return [self._event(rule, "raised", time)]

    def ended(self, time: int) -> list[AlertEvent]:
        """A reading was judged at ``time``: what was open ends, though not before off_delay."""
        over = [r for r, (_, since) in self._open.items() if time - since >= self._plan.off_delay]
        events = [self._event(rule, "returned-to-normal", time) for rule in over]
        for rule in over:
            del self._open[rule]
        return events

    def withdraw(self, time: int) -> list[AlertEvent]:
        """The characteristic leaves the configuration: all that is open is closed."""
        events = [self._event(rule, "withdrawn", time) for rule in self._open]
        self._open.clear()
        return events

    def reconfigure(self, plan: CharacteristicPlan) -> None:
        """Another plan is in force; it moves nothing that is open."""
        self._plan = plan

    def open(self) -> list[OpenField]:
        """What is open now."""
        return [
            OpenField(
                id=known,
                rule=rule,
                direction=None,
                priority=self._plan.priority.other,
                since=times.format_time(since),
                text=self._text(rule, "raised"),
            )
            for rule, (known, since) in self._open.items()
        ]

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        return [self._sequence.value, dict(self._open)]

    def restore(self, state: list[Any]) -> None:
        """Take back what ``state`` gave."""
        self._sequence.value, opened = state
        self._open = {rule: (known, since) for rule, (known, since) in opened.items()}

    def _text(self, rule: str, kind: EventKind) -> str:
        during, after = _WORDS[rule]
        name = self._plan.title.split(",")[0].strip() or self._plan.name
        said = {"raised": during, "withdrawn": _LEFT}.get(kind, after)
        return f"{name}: {said}."

    def _event(self, rule: str, kind: EventKind, time: int) -> AlertEvent:
        known, since = self._open[rule]
        return AlertEvent(
            schema=SCHEMA,
            id=known,
            sequence=self._sequence.next(),
            event=kind,
            characteristic=self._plan.name,
            title=self._plan.title,
            stream={},
            time=times.format_time(time),
            detector=DETECTOR,
            chart=None,
            rule=rule,
            direction=None,
            priority=self._plan.priority.other,
            text=self._text(rule, kind),
            statistic=None,
            signals=[
                {"detector": DETECTOR, "rule": rule, "time": times.format_time(since), "count": 1}
            ],
            subgroup=None,
            shift=None,
            specification=None,
            baseline=None,
            reaction=[_FIRST[rule]],
            caution=text.CAUTION,
            reason="configuration" if kind == "withdrawn" else None,
        )
