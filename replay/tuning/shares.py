"""Which part of the promise a setting gets, in the configuration that it is tried for.

Knows declared detectors and their shares. Must not know recordings or constants.

A promise is of all detectors together (config/README.md, "Promise and budget"): the one that joins
others gets its part, as it would if its constants were worked out from the promise.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Literal

from monitor.plan import Side
from replay.tuning.declared import Declared

Role = Literal["small drifts", "large drifts", "spread"]


def role(kind: str, chart: str, side: Side) -> Role | None:
    """What a detector is there for, where ``tune`` has others for it: one takes the place of those
    with the same. None for any other, such as a spread that shrinks."""
    if chart in ("mean", "individual"):
        return "large drifts" if kind == "shewhart" else "small drifts"
    if kind == "cusum" and chart == "variance" and side == "up":
        return "spread"
    return None


def role_of(each: Declared) -> Role | None:
    """That of a configured detector."""
    return role(each.kind, each.chart, each.side)


def part(own: Role, declared: Sequence[Declared], spread: bool) -> float:
    """The part of a setting for ``own``, above 0 up to 1: what the detectors had that it replaces,
    else what one has by default. ``spread``: whether one of the spread is looked for too.

    Where that one or one for small drifts would be new as well, it is counted as there.
    """
    of_role = {wanted: _shares(declared, wanted) for wanted in ("small drifts", "spread", own)}
    mine = of_role[own] or 1.0
    others = math.fsum(each.share for each in declared if role_of(each) != own)
    if own == "spread":
        others += 0.0 if of_role["small drifts"] else 1.0
    elif spread and not of_role["spread"]:
        others += 1.0
    return mine / (mine + others)


def configured_part(name: str, declared: Sequence[Declared]) -> float:
    """The part of the configured detector of that name."""
    own = next((each.share for each in declared if each.name == name), None)
    return 1.0 if own is None else own / math.fsum(each.share for each in declared)


def _shares(declared: Sequence[Declared], wanted: Role) -> float:
    return math.fsum(each.share for each in declared if role_of(each) == wanted)
