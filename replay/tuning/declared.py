"""A characteristic's detectors as its configuration declares them, ready to be written again.

Knows the configuration's keys. Must not know recordings or settings.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from monitor.configuration.asked import by_intent
from monitor.configuration.presets import PRESETS
from monitor.configuration.sections.characteristic import Characteristic
from monitor.configuration.sections.detectors import (
    AnyDetector,
    CusumDetector,
    ShewhartDetector,
    default_chart,
)
from monitor.plan import CharacteristicPlan, DeclaredDetector, DetectorPlan, Intent, Side


@dataclass(frozen=True, slots=True)
class Declared:
    """One detector: its name, ``kind``, ``chart`` and watched ``side`` however they came about, its
    ``share`` of the promise, whether its constants are worked out ``by_promise``, and its ``keys``
    as they are written."""

    name: str
    kind: str
    chart: str
    side: Side
    share: float
    by_promise: bool
    keys: dict[str, Any]


def intents(plan: CharacteristicPlan) -> list[Intent]:
    """What the detectors are asked to do, those whose constants are worked out; also where every
    baseline is still to be learned."""
    judgement = plan.example()[1]
    if judgement is not None:
        return [each.intent for each in judgement.detectors if each.intent is not None]
    waiting = plan.learn.detectors if plan.learn is not None else ()
    return [each.given for each in waiting if isinstance(each.given, Intent)]


def declared(section: Characteristic, plan: CharacteristicPlan) -> tuple[Declared, ...]:
    """The detectors of ``section``, in their order, under the names they have in ``plan``."""
    judgement = plan.example()[1]
    known: Sequence[DetectorPlan | DeclaredDetector] = ()
    if judgement is not None:
        known = judgement.detectors
    elif plan.learn is not None:
        known = plan.learn.detectors
    usual = default_chart(section.subgroup)
    return tuple(
        Declared(
            named.name,
            each.kind,
            each.chart or usual,
            _side(each),
            each.share,
            by_intent(each, section.promise),
            _keys(each),
        )
        for each, named in zip(section.detectors, known, strict=True)
    )


def _side(section: AnyDetector) -> Side:
    return section.watched if isinstance(section, CusumDetector) else section.direction


def _keys(section: AnyDetector) -> dict[str, Any]:
    keys = section.model_dump(mode="json", by_alias=True, exclude_defaults=True)
    first = {key: keys.pop(key) for key in ("kind", "name") if key in keys}
    if isinstance(section, ShewhartDetector) and "rules" in keys:
        keys["rules"] = next(
            (name for name in PRESETS if _rules(name) == section.rules), keys["rules"]
        )
    return first | keys


def _rules(preset: str) -> object:
    return ShewhartDetector.model_validate({"kind": "shewhart", "rules": preset}).rules
