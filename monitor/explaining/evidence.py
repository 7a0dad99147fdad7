"""What an alert was decided on, as the journal keeps it beside the event for as long as the alert.

Knows plans, look-backs and JSON. Must not know where it is kept, or how it is told.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import orjson

from monitor import plan_json
from monitor.outputs import Alert, Evidence
from monitor.plan import CharacteristicPlan, Plan


@dataclass(frozen=True, slots=True)
class Kept:
    """The stream's last subgroups up to the alert, and the characteristic as it was in force: its
    ``judgement`` is the stream's own."""

    evidence: Evidence
    plan: CharacteristicPlan


def encode(alert: Alert) -> bytes:
    """Everything, as JSON."""
    plan = alert.characteristic
    # Of thousands of streams that may have a baseline each, this one's.
    own = replace(plan, judgement=plan.judgement_of(alert.stream), by_stream={})
    text = orjson.Fragment(plan_json.encode(Plan((own,))))
    return orjson.dumps({**alert.evidence._asdict(), "plan": text})


def decode(text: bytes) -> Kept:
    """What ``encode`` was given; ValueError where it is of another version."""
    kept = orjson.loads(text)
    try:
        plan = plan_json.decode(orjson.dumps(kept.pop("plan")))
        return Kept(
            Evidence(**{name: tuple(each) for name, each in kept.items()}), *plan.characteristics
        )
    except (KeyError, TypeError) as error:
        raise ValueError(f"evidence of another version: {error}") from error
