"""The best setting as lines of a configuration, beside the detectors that stay.

Knows the configuration's keys. Must not know how the setting was found.
"""

from __future__ import annotations

import math
from collections.abc import Collection
from dataclasses import dataclass
from typing import Any

import numpy as np
import yaml

from monitor.plan import ByCount, CharacteristicPlan
from monitor.times import SECOND, format_duration
from replay.tuning.candidates import Request
from replay.tuning.declared import Declared
from replay.tuning.preparing import Held
from replay.tuning.replacing import New, Settled, settled
from replay.tuning.result import Setting


@dataclass(frozen=True, slots=True)
class Fragment:
    """YAML that puts a setting in force; what becomes of the detectors, None where nothing changes;
    and whether it ``promises`` anything."""

    text: str
    settled: Settled | None
    promises: bool


def fragment(
    plan: CharacteristicPlan, best: Setting, spread: Setting | None, held: Held, request: Request
) -> Fragment:
    """The characteristic's subgroup, promise, baseline and detectors, which take the place of those
    that stand there; ``spread`` is the setting to put in beside ``best`` for the spread."""
    declared = request.declared
    if best.origin == "configured" and declared:
        text = _dumped(plan.name, {"detectors": [each.keys for each in declared]})
        return Fragment(text, None, False)
    found = settled(best, spread, held.plan, declared)
    keys: dict[str, Any] = {"subgroup": _subgroup(held), "baseline": _baselines(held)}
    if request.promised is not None:
        keys["promise"] = {"false_alarm_every": format_duration(round(request.promise * SECOND))}
    keys["detectors"] = _detectors(found)
    return Fragment(_dumped(plan.name, keys), found, "promise" in keys)


def _dumped(name: str, keys: dict[str, Any]) -> str:
    text: str = yaml.safe_dump(
        {"characteristics": {name: keys}},
        sort_keys=False,
        allow_unicode=True,
        default_flow_style=None,
        width=100,
    )
    return text


def _detectors(found: Settled) -> list[dict[str, Any]]:
    taken = {each.name for each in found.kept}
    lines = []
    for each in found.order:
        if isinstance(each, Declared):
            lines.append(each.keys)
            continue
        keys = _detector(each, taken)
        taken.add(keys.get("name", _usual_name(each.setting)))
        lines.append(keys)
    return lines


def _usual_name(setting: Setting) -> str:
    return f"{setting.kind}-{setting.chart}" if setting.of_spread else setting.kind


def _detector(new: New, taken: Collection[str]) -> dict[str, Any]:
    setting = new.setting
    found: dict[str, Any] = {"kind": setting.kind}
    if _usual_name(setting) in taken:
        names = ("tuned", *(f"tuned-{number}" for number in range(2, len(taken) + 3)))
        found["name"] = next(name for name in names if name not in taken)
    if setting.of_spread:
        found["chart"] = setting.chart
    share = sum(each.share for each in new.replaces)
    if share and share != 1:
        found["share"] = share  # so that what the promise leaves the others stays the same
    return found | dict(setting.constants)


def _subgroup(held: Held) -> dict[str, Any]:
    plan = held.plan
    if not isinstance(plan, ByCount):
        return {"window": format_duration(plan.window), "min_size": plan.min_size}
    found: dict[str, Any] = {"size": plan.size}
    for key, value in (("every", plan.every), ("max_gap", plan.max_gap)):
        if value is not None:
            found[key] = format_duration(value)
    return found


def _baselines(held: Held) -> dict[str, Any]:
    baselines = held.found.baselines
    if len(baselines) == 1 and not baselines[0].stream:
        [only] = baselines
        return _baseline(only.mean, only.sigma, only.sigma_between)
    own = {e.stream: _baseline(e.mean, e.sigma, e.sigma_between) for e in baselines}
    return {**_together(held), "by_stream": own}


def _together(held: Held) -> dict[str, float]:
    """For streams that the recording does not hold: means and variances of those that it holds,
    weighted by the readings they come from."""
    streams = held.ours.streams
    weight = np.array([float(e.n[: e.fit][~e.left_out[: e.fit]].sum()) for e in streams])
    weight /= weight.sum()
    mean, sigma, between = (
        np.array([getattr(each, key) for each in streams]) for key in ("centre", "sigma", "between")
    )
    return _baseline(
        float(weight @ mean),
        math.sqrt(float(weight @ sigma**2)),
        math.sqrt(float(weight @ between**2)),
    )


def _baseline(mean: float, sigma: float, between: float) -> dict[str, float]:
    keys = {"mean": _short(mean), "sigma": _short(sigma)}
    if between:
        keys["sigma_between"] = _short(between)
    return keys


def _short(value: float) -> float:
    return float(f"{value:.6g}")
