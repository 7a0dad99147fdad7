"""Why an alert rang, as data.

Knows ``Explanation``. Must not know words, or where any of it came from.
"""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from monitor import times
from monitor.explaining.explain import Explanation
from monitor.explaining.working import Step
from monitor.plan import ByCount, CharacteristicPlan


def document(told: Explanation) -> dict[str, Any]:
    """One JSON object; statistics in the characteristic's unit, durations in seconds."""
    event, working = told.told, told.working
    return {
        "id": event["id"],
        "characteristic": event["characteristic"],
        "stream": event["stream"],
        "open": told.is_open,
        "text": event["text"],
        "events": told.events,
        "judged_by": _judged_by(told),
        "source": told.source,
        "agrees": told.agrees,
        "carried": None if working is None else working.carried,
        "steps": [] if working is None else [_step(each) for each in working.steps],
        "rang": None if working is None else _step(working.rang),
    }


def _judged_by(told: Explanation) -> dict[str, Any]:
    judgement, detector = told.judgement, told.detector
    return {
        "subgroup": _subgroup(told.plan),
        "baseline": None if judgement is None else asdict(judgement.baseline),
        "detector": None
        if detector is None
        else {
            "name": detector.name,
            "kind": detector.kind,
            "revision": detector.revision,
            **{_NAMES.get(key, key): each for key, each in asdict(detector.scheme).items()},
        },
        "unchanged": told.unchanged,
    }


_NAMES = {"lam": "lambda"}


def _subgroup(plan: CharacteristicPlan) -> dict[str, Any]:
    subgroup = plan.subgroup
    if not isinstance(subgroup, ByCount):
        return {"window": subgroup.window / times.SECOND, "min_size": subgroup.min_size}
    return {
        "size": subgroup.size,
        "max_gap": None if subgroup.max_gap is None else subgroup.max_gap / times.SECOND,
        "every": None if subgroup.every is None else subgroup.every / times.SECOND,
    }


def _step(step: Step) -> dict[str, Any]:
    return {
        "number": step.number,
        "first": times.format_time(step.first),
        "last": None if step.last is None else times.format_time(step.last),
        "size": step.size,
        "mean": step.mean,
        "z": step.z,
        "readings": step.readings,
        **step.terms,
        "value": step.value,
        "lower": step.lower,
        "upper": step.upper,
        "counts": step.counts,
        "signalled": step.signalled,
    }
