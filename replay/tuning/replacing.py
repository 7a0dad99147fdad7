"""What becomes of the configured detectors where a setting is put in: replaced, kept, left out.

Knows roles and what a chart needs of its subgroups. Must not know YAML or words.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from monitor.plan import ByCount, SubgroupPlan
from replay.tuning.declared import Declared
from replay.tuning.result import Setting
from replay.tuning.shares import Role, role, role_of

SEVERAL = ("range", "sd", "variance")
_SINGLE = ("individual", "moving_range")


@dataclass(frozen=True, slots=True)
class New:
    """A setting to put in, and the configured detectors that it takes the place of."""

    setting: Setting
    replaces: tuple[Declared, ...]


@dataclass(frozen=True, slots=True)
class Settled:
    """What becomes of the detectors: ``order`` is that of the lines to be written."""

    new: tuple[New, ...]
    kept: tuple[Declared, ...]
    unfit: tuple[Declared, ...]
    order: tuple[New | Declared, ...]


def settled(
    best: Setting, spread: Setting | None, plan: SubgroupPlan, declared: Sequence[Declared]
) -> Settled:
    """With ``best`` put in, and ``spread`` beside it where there is one, on subgroups of ``plan``.

    ``declared`` are the configured detectors; what they were written in stays their order.
    """
    new = tuple(
        New(each, tuple(one for one in declared if role_of(one) == _role(each)))
        for each in (best, spread)
        if each is not None
    )
    kept: list[Declared] = []
    unfit: list[Declared] = []
    order: list[New | Declared] = [each for each in new[:1] if not each.replaces]
    for one in declared:
        instead = next((each for each in new if one in each.replaces), None)
        if instead is not None:
            if instead not in order:
                order.append(instead)
        elif _fits(one, plan):
            kept.append(one)
            order.append(one)
        else:
            unfit.append(one)
    order += [each for each in new if each not in order]
    return Settled(new, tuple(kept), tuple(unfit), tuple(order))


def _role(setting: Setting) -> Role | None:
    return role(setting.kind, setting.chart, "up" if setting.of_spread else "both")


def _fits(each: Declared, plan: SubgroupPlan) -> bool:
    if each.keys.get("chart") in SEVERAL:
        return (plan.size if isinstance(plan, ByCount) else plan.min_size) > 1
    return each.keys.get("chart") not in _SINGLE or (isinstance(plan, ByCount) and plan.size == 1)
