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

from monitor import filters, pointers, stream_names, times
from monitor.configuration.config import Config, load, load_measured
from monitor.configuration.presets import OUTSIDE_LIMITS, as_written, preset
from monitor.configuration.sections.base import Section
from monitor.configuration.sections.baseline import StreamBaseline
from monitor.configuration.sections.characteristic import Characteristic
from monitor.configuration.sections.daemon import Alerts, Tls
from monitor.configuration.sections.detectors import (
    AnyDetector,
    CusumDetector,
    EwmaDetector,
    OutsideRule,
    ShewhartDetector,
    default_chart,
)
from monitor.configuration.sections.document import Measured
from monitor.configuration.sections.source import Source
from monitor.configuration.sections.subgroup import Subgroup
from monitor.plan import (
    BaselinePlan,
    BrokerPlan,
    ByCount,
    ByDirection,
    ByWindow,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    Judgement,
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
    SubgroupPlan,
    TlsPlan,
)

PORT, TLS_PORT = 1883, 8883
WIDTH = 3.0
_URGENCY: tuple[Priority, ...] = ("low", "medium", "high")


def read_settings(path: Path, environ: Mapping[str, str]) -> Settings:
    """The daemon's settings in a file or folder; arguments and errors are those of ``load``."""
    return resolve(load(path, environ))


def read_plan(path: Path, environ: Mapping[str, str]) -> Plan:
    """What a replay needs of a file or folder: broker, outputs and journal may be missing, and are
    not looked at. Arguments and errors are those of ``load``."""
    return _plan(load_measured(path, environ))


def resolve(config: Config) -> Settings:
    """The settings that a configuration stands for."""
    document = config.document
    broker, root = document.broker, document.outputs.root
    return Settings(
        plan=_plan(document),
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


def _plan(document: Measured) -> Plan:
    return Plan(
        tuple(
            _characteristic(name, each, document.alerts)
            for name, each in document.characteristics.items()
        )
    )


def _characteristic(name: str, section: Characteristic, alerts: Alerts) -> CharacteristicPlan:
    judge, baseline = _Judge(section), section.baseline.given
    specification = section.specification
    return CharacteristicPlan(
        name=name,
        title=section.title or name,
        unit=section.unit,
        source=_source(section.source),
        subgroup=_subgroup(section.subgroup),
        judgement=None if baseline.common is None else judge(baseline.common),
        by_stream={
            stream_names.parse(stream): judge(own) for stream, own in baseline.by_stream.items()
        },
        priority=_priority(section),
        reaction=_reaction(section),
        off_delay=alerts.off_delay,
        rejoin=alerts.rejoin,
        resolution=section.resolution,
        specification=None
        if specification is None
        else Specification(specification.nominal, specification.lower, specification.upper),
    )


def _subgroup(section: Subgroup) -> SubgroupPlan:
    if section.window is not None:
        return ByWindow(section.window, section.min_size)
    return ByCount(section.size, section.max_gap, section.every)


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


def _scheme(section: AnyDetector, chart: Chart) -> Scheme:
    match section:
        case ShewhartDetector():
            return _shewhart(section, chart)
        case CusumDetector():
            return CusumPlan(
                chart,
                section.k,
                section.h,
                section.head_start,
                section.clip,
                section.after_signal == "hold",
                section.direction,
            )
        case EwmaDetector():
            return EwmaPlan(
                chart,
                section.lam,
                section.width,
                section.limits == "asymptotic",
                section.clip,
                section.after_signal == "hold",
                section.direction,
            )


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


class _Judge:
    """Gives each stream's baseline the characteristic's detectors, with their revisions.

    A revision hashes {baseline, detector, source, subgroup}. Only the baseline differs between ten
    thousand streams, and its key sorts first, so the rest of the canonical text is made once.
    """

    def __init__(self, section: Characteristic) -> None:
        usual = default_chart(section.subgroup)
        source, subgroup = _declared(section.source), _declared(section.subgroup)
        self._detectors: list[tuple[str, str, Scheme, bytes]] = []
        self._known: dict[StreamBaseline, Judgement] = {}
        for each in section.detectors:
            scheme = _scheme(each, each.chart or usual)
            name = each.name or (f"{each.kind}-{each.chart}" if each.chart else each.kind)
            decides = {
                "detector": _judging(each, scheme, usual),
                "source": source,
                "subgroup": subgroup,
            }
            self._detectors.append((name, each.kind, scheme, _canonical(decides)))

    def __call__(self, baseline: StreamBaseline) -> Judgement:
        """The judgement by that baseline; equal baselines share one."""
        known = self._known.get(baseline)
        if known is not None:
            return known
        declared = _canonical(_declared(baseline))
        before = b'{"baseline":' + declared + b","
        judgement = self._known[baseline] = Judgement(
            BaselinePlan(baseline.mean, baseline.sigma, baseline.sigma_between, _sha256(declared)),
            tuple(
                DetectorPlan(name, kind, scheme, _sha256(before + decides[1:]))
                for name, kind, scheme, decides in self._detectors
            ),
        )
        return judgement


def _judging(section: AnyDetector, scheme: Scheme, usual: Chart) -> dict[str, Any]:
    """What of a detector decides."""
    detector = _declared(section)
    detector.pop("name", None)
    if section.chart == usual:
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


def _canonical(value: dict[str, Any]) -> bytes:
    return rfc8785.dumps(value)


def _sha256(text: bytes) -> str:
    return hashlib.sha256(text).hexdigest()[:32]
