"""What a plan will do, as data: the figures an engineer wants before it goes on the line.

Knows plans, the engine's own limits and what is foreseen of them. Must not know how figures are
printed.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import asdict
from typing import Any

from monitor import stream_names, times
from monitor.configuration import catching, false_alarms, pace, verdicts
from monitor.configuration.catching import Catching
from monitor.configuration.config import Config
from monitor.configuration.false_alarms import SHIFT, Ringing
from monitor.configuration.pitfalls import Pitfall, pitfalls
from monitor.configuration.sections.characteristic import Characteristic
from monitor.configuration.verdicts import BudgetVerdict
from monitor.detectors.charts import chart, standard_error
from monitor.methods.runlength import variance_cusum
from monitor.plan import (
    BaselinePlan,
    ByCount,
    ByDirection,
    ByWindow,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    Judgement,
    LearnPlan,
    RulePlan,
    Settings,
    ShewhartPlan,
    SourcePlan,
)


def summary(config: Config, settings: Settings) -> dict[str, Any]:
    """The whole of it; limits in each characteristic's unit, durations in seconds. No secrets.

    ``settings`` are what ``config`` resolves to.
    """
    broker, plans, document = settings.broker, settings.plan.characteristics, config.document
    total = false_alarms.total(plans)
    return {
        "broker": {
            "host": broker.host,
            "port": broker.port,
            "client_id": broker.client_id,
            "keepalive": broker.keepalive,
            "username": broker.username,
            "protocol": broker.protocol,
            "session_expiry": broker.session_expiry if broker.protocol == "5" else None,
            "tls": broker.tls and asdict(broker.tls),
        },
        "outputs": {"root": settings.root, "points": settings.points},
        "journal": settings.journal,
        "characteristics": [
            _characteristic(each, settings.root)
            | _agreed(each, document.characteristics[each.name])
            for each in plans
        ],
        "false_alarms": {"seconds": SHIFT, **asdict(total)},
        "budget": _as_dict(verdicts.of_budget(total, document.budget)),
        "warnings": [
            asdict(each)
            for each in (*_provisional(document.characteristics), *pitfalls(settings.plan))
        ],
    }


def kept(found: dict[str, Any]) -> bool:
    """Whether nothing that was agreed is broken; what nobody can tell is not."""
    promises = [each["promise"] for each in found["characteristics"]]
    return all(each["kept"] is not False for each in [found["budget"], *promises] if each)


def _provisional(sections: Mapping[str, Characteristic]) -> Iterator[Pitfall]:
    """Baseline files that say of themselves that they are to be replaced."""
    for name, section in sections.items():
        file = section.baseline.file
        note = file.origin.note if file else None
        if note and note.startswith("Provisional"):
            yield Pitfall(
                f"characteristics.{name}.baseline.file",
                "says of itself that it is provisional, so the promise may be kept less well",
                "read its note, and estimate again as it says",
            )


def _agreed(plan: CharacteristicPlan, section: Characteristic) -> dict[str, Any]:
    promise = verdicts.of_promise(plan, section.promise)
    foreseen = promise and promise.foreseen
    return {
        "origin": _origin(section),
        "promise": promise
        and asdict(promise)
        | {"never": foreseen == math.inf, "foreseen": None if foreseen == math.inf else foreseen},
    }


def _as_dict(found: BudgetVerdict | Catching | None) -> dict[str, Any] | None:
    return None if found is None else asdict(found)


def _origin(section: Characteristic) -> dict[str, Any] | None:
    """What a baseline file says of where it came from."""
    file = section.baseline.file
    return None if file is None else file.origin.model_dump(exclude_defaults=True)


def _characteristic(plan: CharacteristicPlan, root: str) -> dict[str, Any]:
    specification, (example, judgement) = plan.specification, plan.example()
    return {
        "name": plan.name,
        "title": plan.title,
        "unit": plan.unit,
        "resolution": plan.resolution,
        "specification": specification and asdict(specification),
        "source": _source(plan.source),
        "subgroup": _subgroup(plan),
        "baseline": plan.judgement and _baseline(plan, plan.judgement),
        "by_stream": {
            stream_names.name(stream): _baseline(plan, own)
            for stream, own in plan.by_stream.items()
        },
        # Limits are those of the common baseline, or of one stream where there is none.
        "limits_of": example and stream_names.name(example),
        "learns": plan.learn and _learns(plan.learn),
        "detectors": [_detector(plan, each, judgement.baseline) for each in judgement.detectors]
        if judgement
        else [],
        "priority": _sides(plan.priority),
        "reaction": _sides(plan.reaction),
        "off_delay": plan.off_delay / times.SECOND,
        "rejoin": plan.rejoin / times.SECOND,
        "alert_topic": _topic(plan, root, "alert"),
        "baseline_topic": _topic(plan, root, "baseline"),
    }


def _topic(plan: CharacteristicPlan, root: str, what: str) -> str:
    return "/".join([root, what, plan.name, *(f"<{key}>" for key in pace.keys(plan))])


def _learns(plan: LearnPlan) -> dict[str, Any]:
    return {
        "subgroups": plan.subgroups,
        "over_at_least": plan.over_at_least / times.SECOND,
        "adopt": plan.adopt,
        "detectors": [each.name for each in plan.detectors],
    }


def _subgroup(plan: CharacteristicPlan) -> dict[str, Any]:
    subgroup, coming = plan.subgroup, pace.pace(plan)
    common = {
        # What the limits are for; windows hold more or less.
        "readings": pace.size(plan),
        # In which all streams together send one subgroup's readings.
        "takes": pace.takes(plan),
        # From one subgroup to the next, of all streams together or of each.
        "seconds": coming and coming.seconds,
        "each_stream": coming is not None and coming.each,
    }
    match subgroup:
        case ByCount():
            return {
                "size": subgroup.size,
                "max_gap": _seconds(subgroup.max_gap),
                "every": _seconds(subgroup.every),
                **common,
            }
        case ByWindow():
            return {
                "window": _seconds(subgroup.window),
                "min_size": subgroup.min_size,
                "expected": pace.in_window(plan),
                **common,
            }


def _seconds(microseconds: int | None) -> float | None:
    return None if microseconds is None else microseconds / times.SECOND


def _baseline(plan: CharacteristicPlan, judgement: Judgement) -> dict[str, Any]:
    baseline = judgement.baseline
    return asdict(baseline) | {"standard_error": standard_error(baseline, pace.size(plan))}


def _source(plan: SourcePlan) -> dict[str, Any]:
    lower, upper = plan.plausible_lower, plan.plausible_upper
    return {
        "topic": plan.topic,
        "payload": plan.payload,
        "value": _pointer(plan.value),
        "time": None if plan.time is None else _pointer(plan.time),
        "sequence": None
        if plan.sequence is None
        else {"value": _pointer(plan.sequence.pointer), "wraps": plan.sequence.wraps},
        "stream": {
            **{key: {"topic_level": index + 1} for index, key in plan.captures},
            **{key: {"value": _pointer(pointer)} for key, pointer in plan.stream},
        },
        "use_if": {_pointer(pointer): list(values) for pointer, values in plan.use_if},
        "plausible": {
            "lower": lower if lower > -1e100 else None,
            "upper": upper if upper < 1e100 else None,
        },
        "expected_rate": plan.expected_rate,
        "expected_streams": plan.expected_streams,
    }


def _pointer(tokens: tuple[str, ...]) -> str:
    return "".join("/" + t.replace("~", "~0").replace("/", "~1") for t in tokens)


def _sides(plan: ByDirection[Any]) -> dict[str, Any]:
    return {"up": plan.up, "down": plan.down, "other": plan.other}


def _detector(
    plan: CharacteristicPlan, detector: DetectorPlan, baseline: BaselinePlan
) -> dict[str, Any]:
    scheme, size = detector.scheme, pace.size(plan)
    ringing = false_alarms.of_detector(plan, detector)
    common = {
        "name": detector.name,
        "kind": detector.kind,
        "chart": scheme.chart,
        "direction": scheme.direction,
        "revision": detector.revision,
        "intent": None if detector.intent is None else asdict(detector.intent),
        "false_alarm": _ringing(ringing.whole),
        "catches": _as_dict(catching.of_detector(plan, detector)),
    }
    match scheme:
        case ShewhartPlan():
            return common | {
                "width": scheme.width,
                "exact": scheme.exact,
                **_limits(scheme, baseline, size, scheme.width),
                "rules": [
                    _rule(rule, scheme, baseline, size) | {"false_alarm": _ringing(each)}
                    for rule, each in zip(scheme.rules, ringing.rules, strict=True)
                ],
            }
        case CusumPlan(chart="variance"):
            return common | _variance_cusum(scheme, baseline)
        case CusumPlan():
            return common | _cusum(scheme, baseline, size)
        case EwmaPlan():
            return common | _ewma(scheme, baseline, size)


def _ringing(ringing: Ringing) -> dict[str, Any]:
    """Once in so many subgroups, so many seconds; null where it never is, or nobody knows."""
    never = ringing.subgroups == math.inf
    return {
        "never": never,
        "subgroups": None if never else ringing.subgroups,
        "seconds": None if never else ringing.seconds,
    }


def _rule(rule: RulePlan, plan: ShewhartPlan, baseline: BaselinePlan, size: int) -> dict[str, Any]:
    given: dict[str, Any] = {"rule": rule.rule}
    if rule.length:
        given["length"] = rule.length
    if rule.of:
        given |= {"count": rule.count, "of": rule.of}
    if rule.width:
        given |= {"width": rule.width, **_limits(plan, baseline, size, rule.width)}
    return given


def _limits(
    plan: ShewhartPlan, baseline: BaselinePlan, size: int, width: float
) -> dict[str, float]:
    return chart(plan.chart, baseline, plan.exact).limits(size, width)._asdict()


def _cusum(plan: CusumPlan, baseline: BaselinePlan, size: int) -> dict[str, Any]:
    error = standard_error(baseline, size)
    return {
        "k": plan.k,
        "h": plan.h,
        "head_start": plan.head_start,
        "clip": plan.clip,
        "standard_error": error,
        "after_signal": "hold" if plan.hold else "restart",
        "slack": plan.k * error,
        "limit": plan.h * error,
        "start": plan.head_start * plan.h * error,
        "tuned_to": 2 * plan.k * error,
    }


def _variance_cusum(plan: CusumPlan, baseline: BaselinePlan) -> dict[str, Any]:
    square = baseline.sigma**2
    return {
        "head_start": plan.head_start,
        "after_signal": "hold" if plan.hold else "restart",
        "sums": [
            {
                "statistic": statistic,
                "k": k,
                "h": h,
                "reference": k * square,
                "limit": h * square,
                "start": plan.head_start * h * square,
                "tuned_to": variance_cusum.tuned_to(k),
            }
            for statistic, k, h in plan.sums()
        ],
    }


def _ewma(plan: EwmaPlan, baseline: BaselinePlan, size: int) -> dict[str, Any]:
    error, centre = standard_error(baseline, size), baseline.mean
    settled = plan.width * error * math.sqrt(plan.lam / (2.0 - plan.lam))
    first = settled if plan.asymptotic else plan.width * error * plan.lam
    return {
        "lambda": plan.lam,
        "width": plan.width,
        "limits": "asymptotic" if plan.asymptotic else "exact",
        "clip": plan.clip,
        "standard_error": error,
        "after_signal": "hold" if plan.hold else "restart",
        "centre": centre,
        "first": {"lower": centre - first, "upper": centre + first},
        "settled": {"lower": centre - settled, "upper": centre + settled},
    }
