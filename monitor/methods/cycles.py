"""Whether values come in turn from several sources that differ: heads, cavities, lanes.

Knows places in a cycle. Must not know streams, or what takes turns.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from monitor.methods.normal import Array

LONGEST = 36
"""Sources that may take turns."""

_TURNS = 40
"""Turns in a block: whoever drops out for a moment shifts the places of one block only."""

_SURE = 6.0
"""Standard errors, with so many lengths tried."""


@dataclass(frozen=True, slots=True)
class Cycle:
    """Values ``length`` apart are alike: ``share`` of the variance lies between the places in the
    cycle, ``score`` standard errors from none."""

    length: int
    share: float
    score: float


def cycle(series: Sequence[Array]) -> Cycle | None:
    """The shortest cycle that explains what the best one does; None where none is sure.

    An analysis of variance by place in the cycle within each block of 40 turns, averaged over
    blocks: the F of a block is 1 on average where places do not differ.
    """
    found = [each for length in range(2, LONGEST + 1) if (each := _of(series, length))]
    sure = [each for each in found if each.score > _SURE]
    if not sure:
        return None
    best = max(each.share for each in sure)
    return next(each for each in sure if each.share > 0.8 * best)


def _of(series: Sequence[Array], length: int) -> Cycle | None:
    size = length * _TURNS
    between = within = 0.0
    blocks = 0
    for each in series:
        count = len(each) // size
        if not count:
            continue
        turns = each[: count * size].reshape(count, _TURNS, length)
        places = turns.mean(axis=1)
        centres = places.mean(axis=1)
        on_place = float(((places - centres[:, None]) ** 2).sum()) * _TURNS
        between += on_place
        within += float(((turns - centres[:, None, None]) ** 2).sum()) - on_place
        blocks += count
    above, below = blocks * (length - 1), blocks * (size - length)
    if not blocks or within <= 0:
        return None
    ratio = (between / above) / (within / below)
    spread = max(0.0, (ratio - 1) / _TURNS) * (length - 1) / length
    return Cycle(length, spread / (1 + spread), (ratio - 1) / math.sqrt(2 / above))
