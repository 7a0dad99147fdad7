"""From checked sections to the plan that everything below the configuration works with.

Knows defaults that depend on other keys, and decision revisions. Must not know files or fail: what
could be wrong was found before.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import rfc8785

from monitor import filters, pointers, times
from monitor.config import Config, load
from monitor.plan import (
    BaselinePlan,
    BrokerPlan,
    ByCount,
    ByDirection,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    Judgement,
    Plan,
    Priority,
    RulePlan,
    Scheme,
    SequencePlan,
    Settings,
    ShewhartPlan,
    SourcePlan,
    Specification,
)
from monitor.presets import OUTSIDE_LIMITS, as_written, preset
from monitor.sections.base import Section
from monitor.sections.characteristic import Characteristic
from monitor.sections.daemon import Alerts
from monitor.sections.detectors import (
    AnyDetector,
    CusumDetector,
    EwmaDetector,
    OutsideRule,
    ShewhartDetector,
    default_chart,
)
from monitor.sections.source import Source

WIDTH = 3.0
_URGENCY: tuple[Priority, ...] = ("low", "medium", "high")


def read_settings(path: Path, environ: Mapping[str, str], *, secrets: bool = True) -> Settings:
    """The settings in a file or folder; arguments and errors are those of ``load``."""
    return resolve(load(path, environ, secrets=secrets))


def resolve(config: Config) -> Settings:
    """The settings that a configuration stands for."""
    document = config.document
    broker, root = document.broker, document.outputs.root
    return Settings(
        plan=Plan(
            tuple(
                _characteristic(name, each, document.alerts)
                for name, each in document.characteristics.items()
            )
        ),
        broker=BrokerPlan(
            host=broker.host,
            port=broker.port,
            client_id=broker.client_id or "driftbell-" + re.sub(r"[^A-Za-z0-9_-]", "-", root),
            keepalive=broker.keepalive // times.SECOND,
            username=broker.username,
            password=config.password,
        ),
        root=root,
        points=document.outputs.points,
        journal=str(config.folder / document.journal.path),
    )


def _characteristic(name: str, section: Characteristic, alerts: Alerts) -> CharacteristicPlan:
    baseline, specification = section.baseline, section.specification
    declared = {
        "source": _declared(section.source),
        "subgroup": _declared(section.subgroup),
        "baseline": _declared(baseline),
    }
    return CharacteristicPlan(
        name=name,
        title=section.title or name,
        unit=section.unit,
        source=_source(section.source),
        subgroup=ByCount(section.subgroup.size, section.subgroup.max_gap),
        judgement=Judgement(
            BaselinePlan(
                baseline.mean, baseline.sigma, baseline.sigma_between, _digest(declared["baseline"])
            ),
            tuple(_detector(each, section.subgroup.size, declared) for each in section.detectors),
        ),
        priority=_priority(section),
        reaction=_reaction(section),
        off_delay=alerts.off_delay,
        rejoin=alerts.rejoin,
        specification=None
        if specification is None
        else Specification(specification.nominal, specification.lower, specification.upper),
    )


def _source(section: Source) -> SourcePlan:
    named = filters.parse(section.topic)
    sequence, plausible = section.sequence, section.plausible
    limits: dict[str, float] = {}
    if plausible and plausible.lower is not None:
        limits["plausible_lower"] = plausible.lower
    if plausible and plausible.upper is not None:
        limits["plausible_upper"] = plausible.upper
    return SourcePlan(
        topic=named.topic,
        captures=named.captures,
        payload=section.payload,
        value=pointers.parse(section.value or ""),
        time=None if section.time is None else pointers.parse(section.time),
        sequence=None
        if sequence is None
        else SequencePlan(pointers.parse(sequence.value), sequence.wraps),
        stream=tuple((key, pointers.parse(text)) for key, text in section.stream.items()),
        use_if=tuple((pointers.parse(text), tuple(v)) for text, v in section.use_if.items()),
        expected_rate=section.expected_rate,
        **limits,
    )


def _detector(section: AnyDetector, size: int, declared: Mapping[str, Any]) -> DetectorPlan:
    chart = section.chart or default_chart(size)
    scheme: Scheme
    match section:
        case ShewhartDetector():
            scheme = _shewhart(section, chart)
        case CusumDetector():
            scheme = CusumPlan(
                chart,
                section.k,
                section.h,
                section.head_start,
                section.clip,
                section.after_signal == "hold",
                section.direction,
            )
        case EwmaDetector():
            scheme = EwmaPlan(
                chart,
                section.lam,
                section.width,
                section.limits == "asymptotic",
                section.clip,
                section.after_signal == "hold",
                section.direction,
            )
    name = section.name or (f"{section.kind}-{section.chart}" if section.chart else section.kind)
    revision = _digest({**declared, "detector": _judging(section, scheme, size)})
    return DetectorPlan(name, section.kind, scheme, revision)


def _shewhart(section: ShewhartDetector, chart: Chart) -> ShewhartPlan:
    """Without a width of its own the detector takes that of its outside rule, so that the limits
    shown are those that ring."""
    outside = [rule.width for rule in section.rules if isinstance(rule, OutsideRule) and rule.width]
    width = section.width or next(iter(outside), WIDTH)
    rules = []
    for rule in section.rules:
        given = rule.model_dump(exclude_none=True)
        if isinstance(rule, OutsideRule):
            given.setdefault("width", width)
        rules.append(RulePlan(**given))
    return ShewhartPlan(chart, width, tuple(rules), section.direction)


def _priority(section: Characteristic) -> ByDirection[Priority]:
    given = section.priority
    named = [p for p in (given.up, given.down, given.other) if p]
    highest: Priority = max(named, key=_URGENCY.index, default="medium")
    return ByDirection(given.up or "medium", given.down or "medium", given.other or highest)


def _reaction(section: Characteristic) -> ByDirection[tuple[str, ...]]:
    up, down, other = section.reaction.up, section.reaction.down, section.reaction.other
    if other is None:
        other = list(dict.fromkeys([*(up or ()), *(down or ())]))
    return ByDirection(tuple(up or ()), tuple(down or ()), tuple(other))


# ── decision revisions ───────────────────────────────────────────────────────────────────────────
# They hash what is judged by, as declared. A value that equals its default is left out, so that
# writing the default down changes nothing; names, titles and reactions decide nothing.


def _judging(section: AnyDetector, scheme: Scheme, size: int) -> dict[str, Any]:
    """What of a detector decides."""
    detector = _declared(section)
    detector.pop("name", None)
    if section.chart == default_chart(size):
        detector.pop("chart", None)
    if isinstance(scheme, ShewhartPlan):
        # Several spellings (a preset, a list, a width here or there) say the same.
        detector |= {"width": scheme.width, "rules": [as_written(rule) for rule in scheme.rules]}
        if scheme.width == WIDTH:
            del detector["width"]
        if scheme.rules == preset(OUTSIDE_LIMITS, scheme.width):
            del detector["rules"]
    return detector


def _declared(section: Section) -> dict[str, Any]:
    return section.model_dump(mode="json", by_alias=True, exclude_defaults=True)


def _digest(value: object) -> str:
    return hashlib.sha256(rfc8785.dumps(value)).hexdigest()[:32]  # type: ignore[arg-type]
