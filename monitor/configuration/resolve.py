"""From checked sections to the plan that everything below the configuration works with.

Knows defaults that depend on other keys, and decision revisions. Must not know files or fail: what
could be wrong was found before.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from monitor import filters, judging, pointers, stream_names, times
from monitor.configuration.asked import Asked, planned
from monitor.configuration.config import Config, load, load_measured
from monitor.configuration.presets import OUTSIDE_LIMITS, as_written, preset
from monitor.configuration.sections.base import Section
from monitor.configuration.sections.baseline import StreamBaseline
from monitor.configuration.sections.characteristic import Characteristic
from monitor.configuration.sections.daemon import Alerts, Tls
from monitor.configuration.sections.detectors import (
    WIDTH,
    AnyDetector,
    CusumDetector,
    EwmaDetector,
    OutsideRule,
    ShewhartDetector,
    default_chart,
)
from monitor.configuration.sections.document import Measured
from monitor.configuration.sections.source import Source
from monitor.configuration.unjudged import Baselines
from monitor.plan import (
    BrokerPlan,
    ByDirection,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    DeclaredDetector,
    EwmaPlan,
    Intent,
    Judgement,
    LearnPlan,
    Plan,
    Priority,
    RetentionPlan,
    RulePlan,
    Scheme,
    SequencePlan,
    Settings,
    ShewhartPlan,
    SourcePlan,
    Specification,
    TlsPlan,
)

PORT, TLS_PORT = 1883, 8883
_URGENCY: tuple[Priority, ...] = ("low", "medium", "high")


def read_settings(path: Path, environ: Mapping[str, str]) -> Settings:
    """The daemon's settings in a file or folder; arguments and errors are those of ``load``."""
    return resolve(load(path, environ))


def read_plan(path: Path, environ: Mapping[str, str], baselines: Baselines | None = None) -> Plan:
    """What a replay needs of a file or folder: broker, outputs and journal may be missing, and are
    not looked at. Arguments and errors are those of ``load_measured``."""
    return plan_of(load_measured(path, environ, baselines))


def resolve(config: Config) -> Settings:
    """The settings that a configuration stands for."""
    document = config.document
    broker, root = document.broker, document.outputs.root
    return Settings(
        plan=plan_of(document),
        broker=BrokerPlan(
            host=broker.host,
            port=broker.port or (PORT if broker.tls is None else TLS_PORT),
            client_id=broker.client_id or "driftbell-" + re.sub(r"[^A-Za-z0-9_-]", "-", root),
            keepalive=broker.keepalive // times.SECOND,
            username=broker.username,
            password=config.password,
            protocol=broker.protocol,
            session_expiry=broker.session_expiry // times.SECOND,
            tls=None if broker.tls is None else _tls(broker.tls, config.folder),
        ),
        root=root,
        points=document.outputs.points,
        journal=str(config.folder / document.journal.path),
        retention=RetentionPlan(
            keep=document.journal.keep,
            keep_alerts=document.journal.keep_alerts,
            max_size=document.journal.max_size,
        ),
    )


def _tls(section: Tls, folder: Path) -> TlsPlan:
    certificate, key = (
        None if path is None else str(folder / path) for path in (section.certificate, section.key)
    )
    return TlsPlan(str(folder / section.ca), certificate, key)


def plan_of(document: Measured) -> Plan:
    """What is watched and judged, of a configuration without a fault."""
    return Plan(
        tuple(
            _characteristic(name, each, document.alerts)
            for name, each in document.characteristics.items()
        )
    )


def _characteristic(name: str, section: Characteristic, alerts: Alerts) -> CharacteristicPlan:
    judge, baseline = _Judge(section), section.baseline.given
    learn = section.baseline.learn
    specification = section.specification
    return CharacteristicPlan(
        name=name,
        title=section.title or name,
        unit=section.unit,
        source=_source(section.source),
        subgroup=planned(section.subgroup),
        judgement=None if baseline.common is None else judge(baseline.common),
        by_stream={
            stream_names.parse(stream): judge(own) for stream, own in baseline.by_stream.items()
        },
        learn=None
        if learn is None
        else LearnPlan(
            learn, section.baseline.over_at_least, section.baseline.adopt, judge.detectors
        ),
        priority=_priority(section),
        reaction=_reaction(section),
        off_delay=alerts.off_delay,
        rejoin=alerts.rejoin,
        resolution=section.resolution,
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
        expected_streams=section.expected_streams,
        **limits,
    )


def _written(section: AnyDetector, chart: Chart, size: int) -> Scheme:
    """The scheme of a detector whose constants are written down; ``size`` is a usual subgroup's."""
    match section:
        case ShewhartDetector():
            return _shewhart(section, chart)
        case CusumDetector(k=float(k), h=float(h)):
            return CusumPlan(
                chart,
                k,
                h,
                section.head_start,
                section.clip,
                section.after_signal == "hold",
                section.watched,
                size=size if chart == "variance" else None,
            )
        case EwmaDetector(lam=float(lam)):
            return EwmaPlan(
                chart,
                lam,
                section.width or WIDTH,
                section.limits == "asymptotic",
                section.clip,
                section.after_signal == "hold",
                section.direction,
            )
    raise AssertionError("a detector without constants was let through")


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
    return ShewhartPlan(chart, width, tuple(rules), section.direction, section.exact)


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


def _detectors(section: Characteristic) -> tuple[DeclaredDetector, ...]:
    usual = default_chart(section.subgroup)
    common = {"source": _declared(section.source), "subgroup": _declared(section.subgroup)}
    asked = Asked(
        section.source, section.subgroup, section.baseline, section.promise, section.detectors
    )
    declared: list[DeclaredDetector] = []
    for each in section.detectors:
        intent = asked.intent(each)
        given = intent or _written(each, each.chart or usual, asked.size)
        name = each.name or (f"{each.kind}-{each.chart}" if each.chart else each.kind)
        decides = {"detector": _judging(each, given, usual), **common}
        if intent is not None and section.promise is not None:
            decides["promise"] = _declared(section.promise)
        text = judging.canonical(decides).decode()
        declared.append(DeclaredDetector(name, each.kind, given, text))
    return tuple(declared)


class _Judge:
    """Gives each stream's baseline the characteristic's detectors; equal baselines share them."""

    def __init__(self, section: Characteristic) -> None:
        self.detectors = _detectors(section)
        self._known: dict[StreamBaseline, Judgement] = {}

    def __call__(self, baseline: StreamBaseline) -> Judgement:
        """The judgement by that baseline."""
        known = self._known.get(baseline)
        if known is None:
            known = self._known[baseline] = judging.judgement(
                baseline.mean, baseline.sigma, baseline.sigma_between, self.detectors
            )
        return known


def _judging(section: AnyDetector, given: Intent | Scheme, usual: Chart) -> dict[str, Any]:
    """What of a detector decides."""
    detector = _declared(section)
    detector.pop("name", None)
    if section.chart == usual:
        detector.pop("chart", None)
    if not isinstance(given, Intent):
        detector.pop("share", None)  # the promise is not what its constants come from
    if isinstance(section, ShewhartDetector) and (section.chart == "variance" or not section.exact):
        detector.pop("limits", None)  # they say what would be so without them
    if isinstance(given, ShewhartPlan):
        # Several spellings (a preset, a list, a width here or there) say the same.
        detector |= {"width": given.width, "rules": [as_written(rule) for rule in given.rules]}
        if given.rules == preset(OUTSIDE_LIMITS, given.width):
            del detector["rules"]
    if isinstance(section, CusumDetector) and section.chart == "variance":
        detector["direction"] = section.watched
    if detector.get("width") == WIDTH:
        del detector["width"]
    return detector


def _declared(section: Section) -> dict[str, Any]:
    return section.model_dump(mode="json", by_alias=True, exclude_defaults=True)
