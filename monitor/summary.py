"""What a plan will do, as data: the figures an engineer wants before it goes on the line.

Knows plans and the engine's own limits. Must not know how the figures are printed.
"""

from __future__ import annotations

import math
from typing import Any

from monitor import times
from monitor.detectors.charts import chart, standard_error
from monitor.plan import (
    BaselinePlan,
    ByCount,
    ByDirection,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    RulePlan,
    Settings,
    ShewhartPlan,
    SourcePlan,
)


def summary(settings: Settings) -> dict[str, Any]:
    """The whole of it; limits in each characteristic's unit, durations in seconds. No secrets."""
    broker = settings.broker
    return {
        "broker": {
            "host": broker.host,
            "port": broker.port,
            "client_id": broker.client_id,
            "keepalive": broker.keepalive,
            "username": broker.username,
        },
        "outputs": {"root": settings.root, "points": settings.points},
        "journal": settings.journal,
        "characteristics": [
            _characteristic(each, settings.root) for each in settings.plan.characteristics
        ],
    }


def _characteristic(plan: CharacteristicPlan, root: str) -> dict[str, Any]:
    subgroup, judgement = plan.subgroup, plan.judgement
    assert isinstance(subgroup, ByCount)
    assert judgement is not None
    size, gap, rate = subgroup.size, subgroup.max_gap, plan.source.expected_rate
    baseline, specification = judgement.baseline, plan.specification
    keys = sorted([k for _, k in plan.source.captures] + [k for k, _ in plan.source.stream])
    return {
        "name": plan.name,
        "title": plan.title,
        "unit": plan.unit,
        "specification": specification
        and {
            "nominal": specification.nominal,
            "lower": specification.lower,
            "upper": specification.upper,
        },
        "source": _source(plan.source),
        "subgroup": {
            "size": size,
            "max_gap": None if gap is None else gap / times.SECOND,
            # Of all streams together; how many there are only the readings can tell.
            "seconds": None if rate is None else size / rate,
        },
        "baseline": {
            "mean": baseline.mean,
            "sigma": baseline.sigma,
            "sigma_between": baseline.sigma_between,
            "standard_error": standard_error(baseline, size),
            "revision": baseline.revision,
        },
        "detectors": [_detector(each, baseline, size) for each in judgement.detectors],
        "priority": _sides(plan.priority),
        "reaction": _sides(plan.reaction),
        "off_delay": plan.off_delay / times.SECOND,
        "rejoin": plan.rejoin / times.SECOND,
        "alert_topic": "/".join([root, "alert", plan.name, *(f"<{key}>" for key in keys)]),
    }


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
    }


def _pointer(tokens: tuple[str, ...]) -> str:
    return "".join("/" + t.replace("~", "~0").replace("/", "~1") for t in tokens)


def _sides(plan: ByDirection[Any]) -> dict[str, Any]:
    return {"up": plan.up, "down": plan.down, "other": plan.other}


def _detector(plan: DetectorPlan, baseline: BaselinePlan, size: int) -> dict[str, Any]:
    scheme = plan.scheme
    common = {
        "name": plan.name,
        "kind": plan.kind,
        "chart": scheme.chart,
        "direction": scheme.direction,
        "revision": plan.revision,
    }
    match scheme:
        case ShewhartPlan():
            return common | _shewhart(scheme, baseline, size)
        case CusumPlan():
            return common | _cusum(scheme, baseline, size)
        case EwmaPlan():
            return common | _ewma(scheme, baseline, size)


def _shewhart(plan: ShewhartPlan, baseline: BaselinePlan, size: int) -> dict[str, Any]:
    return {
        "width": plan.width,
        **_limits(plan, baseline, size, plan.width),
        "rules": [_rule(rule, plan, baseline, size) for rule in plan.rules],
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
    return chart(plan.chart, baseline).limits(size, width)._asdict()


def _cusum(plan: CusumPlan, baseline: BaselinePlan, size: int) -> dict[str, Any]:
    error = standard_error(baseline, size)
    return {
        "k": plan.k,
        "h": plan.h,
        "head_start": plan.head_start,
        "clip": plan.clip,
        "after_signal": "hold" if plan.hold else "restart",
        "slack": plan.k * error,
        "limit": plan.h * error,
        "start": plan.head_start * plan.h * error,
        "tuned_to": 2 * plan.k * error,
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
        "after_signal": "hold" if plan.hold else "restart",
        "centre": centre,
        "first": {"lower": centre - first, "upper": centre + first},
        "settled": {"lower": centre - settled, "upper": centre + settled},
    }
