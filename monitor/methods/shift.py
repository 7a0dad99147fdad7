"""Which of several series moved once and stayed away, however near an end that was.

Knows ranks, change points and long-run variances. Must not know times, units or what is done about
it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.methods import autocorrelation
from monitor.methods.normal import Array

LEAST = 50
"""Values of a series; fewer are passed over."""

_EDGE, _EDGE_SHARE = 10, 0.01
"""No cut is sought nearer to an end: a few odd values there are no new level."""
_SURE = 1e-4
"""A chance so small that where neighbours follow each other in a short series, and their
correlation is underestimated, a steady one is still named well below once in a hundred."""
_MATTERS = 0.004
"""Of the long-run variance, what a move must explain: as much as makes a step in the middle count
as wandering (``wander.GROWTH`` = 1.5 = (1 + 200x)/(1 + 50x)). A long series shows smaller ones."""
_LAGS = 200
_LOST = 4
"""Means of values by which each correlation is short, in units of inflation / length, once two
means are taken out at a place that was sought: simulated, 4 brings it right."""
_MOST_LOST = 0.75
_NOTHING = 1e-12


@dataclass(frozen=True, slots=True)
class Move:
    """Series ``number`` moved at ``index``: from there on its mean is ``by`` (its own unit) off the
    mean before. ``share`` of its values lie on the shorter side, which is the ``late`` one or
    not."""

    number: int
    index: int
    by: float
    share: float
    late: bool


@dataclass(frozen=True, slots=True)
class _Cut:
    """The best one; ``strength``: what it explains, over the variance of what it leaves, a value;
    ``left``: that rest, standardised."""

    index: int
    strength: float
    left: Array


def moves(series: Sequence[Array]) -> tuple[Move, ...]:
    """Those that moved and stayed away, the one that did so most clearly first; where none does by
    itself, all of them, if they did together.

    Each is cut in two where ranks differ most (A. N. Pettitt 1979, Applied Statistics 28: wild
    values weigh no more than others). The difference is held against the long-run variance of what
    the cut leaves (all series together tell it), so that the move does not hide itself; its chance
    under every cut is that of :func:`chance`, times the number of series (C. E. Bonferroni).
    """
    ranked = {
        number: ranks
        for number, each in enumerate(series)
        if len(each) >= LEAST and (ranks := _ranks(each)) is not None
    }
    cuts = {number: _best_cut(ranks) for number, ranks in ranked.items()}
    if not cuts:
        return ()
    tests = len(cuts) + (len(cuts) > 1)
    inflation = _inflation([cut.left for cut in cuts.values()])
    found = [
        (cut.strength, _move(series[number], number, cut.index))
        for number, cut in cuts.items()
        if _lasting(cut, inflation, tests)
    ]
    if not found and len(cuts) > 1:
        found = _together(series, ranked, tests)
    return tuple(move for _, move in sorted(found, key=lambda each: -each[0]))


def levelled(series: Sequence[Array], moved: Sequence[Move]) -> list[Array]:
    """The same series with the moves taken out of them."""
    flat = list(series)
    for move in moved:
        each = flat[move.number].copy()
        each[move.index :] -= move.by
        flat[move.number] = each
    return flat


def chance(reach: float, edge: float) -> float:
    """P(max |B(t)|/√(t(1 − t)) > ``reach``) for a Brownian bridge B and t from ``edge`` to
    1 − ``edge``: R. Miller & D. Siegmund 1982, Biometrics 38, for large values of ``reach``; 1
    up to 2, where the formula tells nothing."""
    if reach <= 2:
        return 1.0
    wide = 2 * math.log((1 - edge) / edge)
    density = math.exp(-reach * reach / 2) / math.sqrt(2 * math.pi)
    return min(1.0, density * ((reach - 1 / reach) * wide + 4 / reach))


def _ranks(values: Array) -> Array | None:
    """Ranks, equal values their middle one, standardised; None where nothing varies."""
    _, which, counts = np.unique(values, return_inverse=True, return_counts=True)
    if len(counts) < 2:
        return None
    middle = counts.cumsum() - (counts - 1) / 2
    return _standard(middle[which])


def _standard(values: Array) -> Array:
    centred = values - values.mean()
    sd = float(centred.std())
    return np.asarray(centred / sd if sd > 0 else centred)


def _edge(count: int) -> int:
    return max(_EDGE, int(_EDGE_SHARE * count))


def _best_cut(ranks: Array) -> _Cut:
    """Of standardised ranks."""
    count = len(ranks)
    edge = _edge(count)
    before = np.arange(edge, count - edge + 1, dtype=np.float64)
    sums = ranks.cumsum()[edge - 1 : count - edge]
    explained = sums**2 / (before * (count - before))
    best = int(explained.argmax())
    index = best + edge
    left = ranks.copy()
    left[:index] -= left[:index].mean()
    left[index:] -= left[index:].mean()
    strength = float(explained[best]) / max(float(left.var()), _NOTHING)
    return _Cut(index, strength, _standard(left))


def _inflation(left: Sequence[Array]) -> float:
    """Of the variance of long means, 1 or more, in what cuts have left."""
    total, longest = sum(map(len, left)), max(map(len, left))
    lags = min(_LAGS, max(2, longest // 4))
    correlation = autocorrelation.correlations(left, lags)
    memory = autocorrelation.memory(correlation, total)
    usual = total / len(left)
    # The first two lags are always remembered; independent values lose nothing that matters.
    lost = min(_LOST * max(len(memory) - 2, 0) / usual, _MOST_LOST)
    return max(1.0, autocorrelation.inflation(memory) / (1 - lost))


def _lasting(cut: _Cut, inflation: float, tests: int) -> bool:
    count = len(cut.left)
    strength = cut.strength / inflation
    likely = chance(math.sqrt(count * strength), _edge(count) / count)
    return strength > _MATTERS and tests * likely < _SURE


def _move(values: Array, number: int, index: int) -> Move:
    by = float(values[index:].mean() - values[:index].mean())
    late = 2 * index >= len(values)
    share = min(index, len(values) - index) / len(values)
    return Move(number, index, by, share, late)


def _together(
    series: Sequence[Array], ranked: dict[int, Array], tests: int
) -> list[tuple[float, Move]]:
    """All series that reach over about as many values, where the mean of them moved."""
    longest = max(map(len, ranked.values()))
    alike = {number: each for number, each in ranked.items() if 2 * len(each) >= longest}
    if len(alike) < 2:
        return []
    count = min(map(len, alike.values()))
    mean = np.zeros(count)
    for each in alike.values():
        # Value for value, or where one has more, those at the same part of its way.
        mean += each[np.arange(count) * len(each) // count]
    if not mean.any():
        return []
    cut = _best_cut(_standard(mean))
    if not _lasting(cut, _inflation([cut.left]), tests):
        return []
    found = [
        _move(series[number], number, cut.index * len(each) // count)
        for number, each in alike.items()
    ]
    return [(abs(move.by), move) for move in found]
