"""The best setting as lines of a configuration.

Knows the configuration's keys. Must not know how the setting was found.
"""

from __future__ import annotations

from typing import Any

import yaml

from monitor.plan import ByCount, CharacteristicPlan
from monitor.times import format_duration
from replay.tuning.preparing import Held
from replay.tuning.result import Baseline, Setting


def fragment(plan: CharacteristicPlan, best: Setting, held: Held) -> str:
    """YAML with the characteristic's subgroup, baseline and detectors, which take the place of
    those that stand there."""
    detector: dict[str, Any] = {"kind": best.kind}
    if best.chart not in ("mean", "individual"):
        detector["chart"] = best.chart
    detector |= dict(best.constants)
    baselines = held.found.baselines
    keys = {
        "subgroup": _subgroup(held),
        "baseline": _baseline(baselines[0])
        if len(baselines) == 1 and not baselines[0].stream
        else {"by_stream": {each.stream: _baseline(each) for each in baselines}},
        "detectors": [detector],
    }
    text: str = yaml.safe_dump(
        {"characteristics": {plan.name: keys}},
        sort_keys=False,
        allow_unicode=True,
        default_flow_style=None,
        width=100,
    )
    return text


def _subgroup(held: Held) -> dict[str, Any]:
    plan = held.plan
    if not isinstance(plan, ByCount):
        return {"window": format_duration(plan.window), "min_size": plan.min_size}
    found: dict[str, Any] = {"size": plan.size}
    for key, value in (("every", plan.every), ("max_gap", plan.max_gap)):
        if value is not None:
            found[key] = format_duration(value)
    return found


def _baseline(found: Baseline) -> dict[str, float]:
    keys = {"mean": _short(found.mean), "sigma": _short(found.sigma)}
    if found.sigma_between:
        keys["sigma_between"] = _short(found.sigma_between)
    return keys


def _short(value: float) -> float:
    return float(f"{value:.6g}")
