"""What was put into a scene against what the alerts said: found, missed, false.

Knows causes and alert events. Must not know how either was sent. Time is counted in readings of the
stream, which holds for a gauge that sends no time as well.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from monitor.demo.line import SPACING
from monitor.demo.scenes import Cause
from monitor.messages import AlertEvent
from monitor.times import SECOND, format_time


@dataclass(frozen=True, slots=True)
class Finding:
    """What became of one cause; all None where nothing rang for it.

    ``seconds`` of line time and ``readings`` of the stream lie from the onset to the alert;
    ``size`` is the cause's average over them, which is what the alert's estimate, ``said``, is of.
    """

    cause: Cause
    alert: AlertEvent | None = None
    seconds: float | None = None
    readings: int | None = None
    size: float | None = None
    said: float | None = None


def as_json(cause: Cause, start: int) -> dict[str, object]:
    """A cause for other programs; ``start`` is the scene's, µs since 1970."""
    return {
        "cause": cause.text,
        "characteristic": cause.characteristic,
        "head": cause.head,
        "kind": cause.kind,
        "direction": cause.direction,
        "onset": format_time(start + round(cause.onset * SECOND)),
        "growth": cause.growth,
        "size": cause.size,
    }


def elapsed(event: AlertEvent) -> float:
    """Seconds of line time from the scene's start to the last reading the event was decided on."""
    subgroup = event["subgroup"]
    assert subgroup is not None, "every event of a scene is decided at a subgroup"
    readings = subgroup["number"] * subgroup["size"]
    return readings * SPACING[event["characteristic"]]


def score(
    causes: Sequence[Cause], raised: Sequence[AlertEvent]
) -> tuple[list[Finding], list[AlertEvent]]:
    """For each cause the first alert that is its own, and the alerts that are no cause's.

    An alert belongs to a cause when it names the cause's stream and direction, after the onset.
    """
    findings = []
    false = list(raised)
    for cause in causes:
        own = [event for event in raised if _belongs(event, cause)]
        false = [event for event in false if event not in own]
        findings.append(_found(cause, own[0]) if own else Finding(cause))
    return findings, false


def _belongs(event: AlertEvent, cause: Cause) -> bool:
    if event["characteristic"] != cause.characteristic or elapsed(event) <= cause.onset:
        return False
    if cause.head is not None and event["stream"]["head"] != str(cause.head):
        return False
    return event["direction"] == (None if cause.kind == "spread" else cause.direction)


def _found(cause: Cause, event: AlertEvent) -> Finding:
    at = elapsed(event)
    shift = event["shift"]
    return Finding(
        cause,
        event,
        seconds=round(at - cause.onset, 1),
        readings=round((at - cause.onset) / SPACING[cause.characteristic]),
        size=round(cause.average(at) * cause.size, 4),
        said=None if shift is None else shift["estimate"],
    )
