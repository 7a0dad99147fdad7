"""The best setting as lines of a configuration, beside the detectors that stay.

Knows the configuration's keys. Must not know how the setting was found.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import yaml

from monitor.plan import ByCount, CharacteristicPlan, SubgroupPlan
from monitor.times import format_duration
from replay.tuning.declared import Declared
from replay.tuning.preparing import Held
from replay.tuning.result import Setting

_OF_LOCATION = ("mean", "individual")
_SEVERAL = ("range", "sd", "variance")
_SINGLE = ("individual", "moving_range")


@dataclass(frozen=True, slots=True)
class Fragment:
    """YAML that puts a setting in force, and ``notes``: what it replaces, keeps and leaves out."""

    text: str
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Others:
    """What becomes of the configured detectors; ``at``: where the new one stands among the kept."""

    replaced: tuple[Declared, ...]
    kept: tuple[Declared, ...]
    unfit: tuple[Declared, ...]
    at: int


def fragment(
    plan: CharacteristicPlan, best: Setting, held: Held, declared: Sequence[Declared]
) -> Fragment:
    """The characteristic's subgroup, baseline and detectors, which take the place of those that
    stand there; ``declared`` are the configured detectors."""
    if best.origin == "configured" and declared:
        text = _dumped(plan.name, {"detectors": [each.keys for each in declared]})
        return Fragment(text, (_unchanged(plan.name, best),))
    others = _others(best, held.plan, declared)
    detectors = [each.keys for each in others.kept]
    detectors.insert(others.at, _detector(best, others))
    keys = {"subgroup": _subgroup(held), "baseline": _baselines(held), "detectors": detectors}
    return Fragment(_dumped(plan.name, keys), tuple(_notes(plan, best, held, others)))


def _dumped(name: str, keys: dict[str, Any]) -> str:
    text: str = yaml.safe_dump(
        {"characteristics": {name: keys}},
        sort_keys=False,
        allow_unicode=True,
        default_flow_style=None,
        width=100,
    )
    return text


def _others(best: Setting, plan: SubgroupPlan, declared: Sequence[Declared]) -> _Others:
    replaced = tuple(each for each in declared if _is_replaced(each, best))
    fitting = [each for each in declared if each not in replaced and _fits(each, plan)]
    first = declared.index(replaced[0]) if replaced else 0
    return _Others(
        replaced,
        tuple(fitting),
        tuple(each for each in declared if each not in replaced and each not in fitting),
        sum(declared.index(each) < first for each in fitting),
    )


def _is_replaced(each: Declared, best: Setting) -> bool:
    """A detector of small drifts takes the place of those, a Shewhart chart that of its like."""
    alike = ("shewhart",) if best.kind == "shewhart" else ("cusum", "ewma")
    return each.kind in alike and each.chart in _OF_LOCATION


def _fits(each: Declared, plan: SubgroupPlan) -> bool:
    if each.keys.get("chart") in _SEVERAL:
        return (plan.size if isinstance(plan, ByCount) else plan.min_size) > 1
    return each.keys.get("chart") not in _SINGLE or (isinstance(plan, ByCount) and plan.size == 1)


def _detector(best: Setting, others: _Others) -> dict[str, Any]:
    found: dict[str, Any] = {"kind": best.kind}
    taken = {each.name for each in others.kept}
    if best.kind in taken:
        names = ("tuned", *(f"tuned-{number}" for number in range(2, len(taken) + 3)))
        found["name"] = next(name for name in names if name not in taken)
    share = sum(each.share for each in others.replaced)
    if share and share != 1:
        found["share"] = share  # so that what the promise leaves the others stays the same
    return found | dict(best.constants)


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


def _unchanged(characteristic: str, best: Setting) -> str:
    name = best.name.removeprefix("as configured: ")
    return (
        f"Nothing need change: {name}, as it stands in {characteristic} with its baseline, does "
        "best. These are the detectors that stand there."
    )


def _notes(plan: CharacteristicPlan, best: Setting, held: Held, others: _Others) -> Iterator[str]:
    replaced, kept, unfit = others.replaced, others.kept, others.unfit
    yield (
        f"{best.name}, held against centre and spread of the first part of the recording. These "
        f"keys take the place of subgroup, baseline and detectors in {plan.name}; every other key "
        "stays, the promise too."
    )
    said = f"It replaces {_listed(replaced)}" if replaced else "It replaces no detector"
    yield said + (f" and keeps {_listed(kept)}." if kept else ".")
    if kept:
        yield (
            "It was judged as the only detector: driftbell check says how often all of them ring "
            "together, and whether that keeps the promise."
        )
    for each in unfit:
        needs = "two readings or more" if each.keys["chart"] in _SEVERAL else "single readings"
        yield (
            f"{each.name} is left out: a chart of {each.chart.replace('_', ' ')} needs {needs} in "
            f"a subgroup, and these are {held.found.said}."
        )
    if held.plan != plan.subgroup:
        fixed = [e for e in kept if e.chart == "variance" and e.kind == "cusum" and "h" in e.keys]
        if fixed:
            yield (
                f"The constants of {_listed(fixed)} were written for other subgroups: work them "
                "out again, or write catch_ratio."
            )
    yield (
        "The baseline replaces whatever stands there, a file: or learn: too, since the constants "
        "were fitted to these values."
    )
    count = len(held.found.baselines)
    if count > 1 or held.found.baselines[0].stream:
        expected = plan.source.expected_streams or 0
        more = f" ({expected:,} are expected)" if expected > count else ""
        yield (
            f"The recording holds {count:,} stream{'s' if count > 1 else ''}; any other{more} is "
            "held against the values of all together. Where others bring more readings, it rings "
            "more often in proportion."
        )


def _listed(found: Sequence[Declared]) -> str:
    *most, last = (each.name for each in found)
    return f"{', '.join(most)} and {last}" if most else last
