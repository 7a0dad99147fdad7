"""Run lengths of any set of Shewhart rules by simulation, with a stated error.

Knows every rule, for many series at once. Must not know charts or units; where the exact chain can
answer, ask that.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.methods.normal import Array
from monitor.methods.runlength.chains import Side
from monitor.methods.runlength.rules import Rule

_SERIES = 20_000
_POINTS = 20_000_000

Memory = Array
"""What a rule remembers of each series: rows of numbers, a column a series."""

Watch = Callable[[Memory, Array], tuple[Memory, NDArray[np.bool_]]]
"""From the memory and the new points to the next memory, and which series signal."""


@dataclass(frozen=True, slots=True)
class Simulated:
    """An average run length and its standard error; inf and inf where nothing signalled."""

    run_length: float
    standard_error: float


def run_length(
    rules: Sequence[Rule], shift: float = 0.0, *, direction: Side = "both", seed: int = 1
) -> Simulated:
    """Average run length until the first of ``rules`` signals, from 20,000 series of normal values.

    Its standard error is some 0.7 % where the run length is below 1,000. Beyond, the series are cut
    off at 20 million points in all, and points per signal is given, with an error of √signals.
    The same ``seed`` gives the same answer.
    """
    rng = np.random.default_rng(seed)
    watches = [_watch(rule, direction) for rule in rules]
    memories = [np.zeros((rows, _SERIES)) for rows, _ in watches]
    running, points, squares, length = _SERIES, 0, 0.0, 0
    while running and points < _POINTS:
        z = rng.standard_normal(running) + shift
        points += running
        length += 1
        signalling = np.zeros(running, np.bool_)
        for i, (_, watch) in enumerate(watches):
            memories[i], met = watch(memories[i], z)
            signalling |= met
        ended = int(signalling.sum())
        if ended:
            squares += ended * length * length
            running -= ended
            memories = [memory[:, ~signalling] for memory in memories]
    signals = _SERIES - running
    if not signals:
        return Simulated(math.inf, math.inf)
    mean = points / signals
    spread = math.sqrt(squares / signals - mean * mean) if not running else mean
    return Simulated(mean, spread / math.sqrt(signals))


def first_signals(
    rules: Sequence[Rule], series: Array, *, direction: Side = "both"
) -> NDArray[np.int64]:
    """The point, from 1, at which the first of ``rules`` signals in each of ``series``, a column
    each and a row a point; one more than there are where none does."""
    count, width = series.shape
    watches = [_watch(rule, direction) for rule in rules]
    memories = [np.zeros((rows, width)) for rows, _ in watches]
    found = np.full(width, count + 1)
    for at, z in enumerate(series, 1):
        for i, (_, watch) in enumerate(watches):
            memories[i], met = watch(memories[i], z)
            found[met] = np.minimum(found[met], at)
    return found


def _watch(rule: Rule, direction: Side) -> tuple[int, Watch]:
    """How many rows of memory the rule needs, all 0 before the first point, and its step."""
    up, down = direction != "down", direction != "up"
    width, count, of, length = rule.width, rule.count, rule.of, rule.length

    def outside(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        return memory, (up & (z > width)) | (down & (z < -width))

    def zone(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        rises, falls = up & (z > width), down & (z < -width)
        above, below = np.vstack((memory[1:of], rises)), np.vstack((memory[of + 1 :], falls))
        met = rises & (above.sum(axis=0) >= count) | falls & (below.sum(axis=0) >= count)
        return np.vstack((above, below)), met

    def run(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        above, below = (memory[0] + 1) * (z > 0), (memory[1] + 1) * (z < 0)
        return np.stack((above, below)), (up & (above >= length)) | (down & (below >= length))

    def trend(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        points, rises, falls, before = memory
        first = points == 0
        rises = np.where((z > before) & ~first, rises + 1, 1)
        falls = np.where((z < before) & ~first, falls + 1, 1)
        met = (up & (rises >= length)) | (down & (falls >= length))
        return np.stack((points + 1, rises, falls, z)), met

    def alternation(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        points, side, row, before = memory
        turned = np.where(points == 0, 0, np.sign(z - before))
        row = np.where((turned != 0) & (turned == -side), row + 1, 1 + np.abs(turned))
        return np.stack((points + 1, turned, row, z)), row >= length

    def stratification(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        row = (memory[0] + 1) * (np.abs(z) < width)
        return row[None, :], row >= length

    def mixture(memory: Memory, z: Array) -> tuple[Memory, NDArray[np.bool_]]:
        row = (memory[0] + 1) * (np.abs(z) > width)
        return row[None, :], row >= length

    steps: dict[str, tuple[int, Watch]] = {
        "outside": (0, outside),
        "zone": (2 * of, zone),
        "run": (2, run),
        "trend": (4, trend),
        "alternation": (4, alternation),
        "stratification": (1, stratification),
        "mixture": (1, mixture),
    }
    return steps[rule.rule]
