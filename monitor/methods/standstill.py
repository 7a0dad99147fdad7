"""Whether a gauge stood still: more identical readings in a row than its steps make likely.

Knows values in their order. Must not know times, units or what a gauge is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.methods.normal import Array

_SURE = 1e-9
"""Expected number of runs as long, below which one is no chance: values that follow each other stay
a little longer than the formula knows."""
_FEWEST = 20
"""In a row, below which nobody would call it stuck."""
_MOST = 20
"""Standstills that are looked for behind each other."""
_RUNS, _RUNS_OF_ONE = 100, 30
"""Runs outside the longest that tell how long runs are, of all values and of the commonest."""


@dataclass(frozen=True, slots=True)
class Standstill:
    """The longest run of identical values: from index ``start``, ``length`` of them. ``runs`` such
    runs hold ``values`` values together, that one among them."""

    start: int
    length: int
    runs: int
    values: int


def standstill(values: Array) -> Standstill | None:
    """Runs that are far longer than chance makes them, None where none is.

    A run of L is due about N·pᴸ times in N values (W. Feller 1968, An Introduction to Probability
    Theory, volume 1, section XIII.7), with p the chance of one more like the last. As p counts,
    outside the longest run and those half as long, the share of the commonest value, or how often
    it repeats itself where that is more often: a coarse gauge on a slow process has long runs with
    nothing wrong.
    """
    count = len(values)
    if count < 2 * _FEWEST:
        return None
    begins = np.flatnonzero(np.append(True, values[1:] != values[:-1]))
    lengths = np.diff(np.append(begins, count))
    longest = int(lengths.argmax())
    start, length = int(begins[longest]), int(lengths[longest])
    if length < _FEWEST or length == count:
        return None
    others = lengths.copy()
    for run in np.argsort(-lengths, kind="stable")[:_MOST].tolist():
        if lengths[run] < max(length / 2, _FEWEST):
            return None
        others[run] = 0  # what it showed while it stood still makes its values look common
        again = _again(values[begins], others)
        if again is None:
            return None
        stuck = lengths > max(math.log(_SURE / count) / math.log(again), _FEWEST - 1)
        if stuck[longest]:
            break
    else:
        return None
    return Standstill(start, length, int(stuck.sum()), int(lengths[stuck].sum()))


def _again(value: Array, lengths: NDArray[np.int64]) -> float | None:
    """The chance of one more reading like the last, from runs of ``lengths`` (0: none) of each
    ``value``; None of too few."""
    some = lengths > 0
    every, count = int(np.count_nonzero(some)), float(lengths.sum())
    if every < _RUNS:
        return None
    _, which = np.unique(value, return_inverse=True)
    totals = np.bincount(which, weights=lengths)
    commonest = int(totals.argmax())
    total, runs = float(totals[commonest]), int(np.count_nonzero(some & (which == commonest)))
    leaves = every / count
    if runs >= _RUNS_OF_ONE:
        leaves = min(leaves, runs / total * (1 - 2 / math.sqrt(runs)))
    return max(total / count, 1 - leaves, 1 / count)
