"""The tabular CUSUM over arrays: signal for signal that of ``monitor.detectors``.

Knows sums. Must not know how limits are found or what a drift is.

A sum that never restarts is its cumulative sum less the least that had before (E. S. Page 1954). A
restarted sum lies below it and meets it where it rests at zero; so one pass serves every h, and
only cycles that rise above h are walked again, number by number, as the engine walks them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.plan import CusumPlan
from replay.readings import Places, Values
from replay.tuning.grouped import GroupedStream
from replay.tuning.paths import Peaks, Signals, in_order, jointly, segments

_CLOSE = 1e-6
"""Cycles this near to h are walked as well: a cumulative sum of millions is that inexact."""


@dataclass(frozen=True, slots=True)
class _Side:
    up: bool
    values: Values
    k: float
    share: float
    """Of the limit: 1, or what a lower sum of its own h has in proportion."""
    sums: Values
    begin: Places
    end: Places
    top: Values


class CusumPath:
    """One CUSUM over one stream, whatever the ``h`` of ``plan``."""

    def __init__(self, plan: CusumPlan, stream: GroupedStream) -> None:
        self._plan = plan
        self._segments = list(segments(stream))
        self._sides = [
            _side(up, values, k, share, self._segments)
            for up, values, k, share in standardised(plan, stream)
        ]

    def peaks(self) -> Peaks:
        """Levels are divided by the side's share, so that one limit holds for both."""
        return jointly([Peaks(s.top / s.share, s.begin, s.end) for s in self._sides])

    def unit(self) -> float:
        """Sums have none of their own."""
        return 1.0

    def signals(self, limit: float) -> Signals:
        """With h at ``limit``."""
        at: list[int] = []
        up: list[bool] = []
        for side in self._sides:
            found = self._of_side(side, limit * side.share)
            at += found
            up += [side.up] * len(found)
        return in_order(at, up)

    def _of_side(self, side: _Side, h: float) -> list[int]:
        start, hold = self._plan.head_start * h, self._plan.hold
        found: list[int] = []
        hot = np.flatnonzero(side.top > h - _CLOSE)
        begins, ends = side.begin[hot], side.end[hot]
        for first, stop in self._segments:
            settled = first
            if start > 0:
                # From a head start the sum lies above, until both rest.
                settled = _walk(side, first, stop, h, start, start, hold, found, to_rest=True)
            low, high = np.searchsorted(begins, (first, stop))
            for begin, end in zip(begins[low:high].tolist(), ends[low:high].tolist(), strict=True):
                if end > settled:
                    # Where the head start's walk ended inside a cycle, both sums were at rest.
                    _walk(side, max(begin, settled), end, h, 0.0, start, hold, found)
        return found


def standardised(plan: CusumPlan, stream: GroupedStream) -> list[tuple[bool, Values, float, float]]:
    """For each side watched: whether it is the upper, its values, its k, its share of h."""
    up, down = plan.direction != "down", plan.direction != "up"
    if plan.chart == "variance":
        freedom = stream.n - 1
        # A subgroup of one says nothing of the spread, and leaves both sums as they are.
        weight = freedom / np.maximum(freedom if plan.size is None else plan.size - 1, 1)
        ratio = np.where(freedom > 0, stream.sd, 0.0) ** 2 / stream.sigma**2
        lower = plan.k if plan.k_lower is None else plan.k_lower
        share = 1.0 if plan.h_lower is None else plan.h_lower / plan.h
        sides = []
        if up:
            sides.append((True, weight * (ratio - plan.k), 0.0, 1.0))
        if down:
            sides.append((False, weight * (lower - ratio), 0.0, share))
        return sides
    z = (stream.mean - stream.centre) / stream.error
    if plan.clip is not None:
        z = np.clip(z, -plan.clip, plan.clip)
    return ([(True, z, plan.k, 1.0)] if up else []) + ([(False, -z, plan.k, 1.0)] if down else [])


def sums(steps: Values) -> Values:
    """C ← max(0, C + step) from 0, for every step; exactly 0 where it rests."""
    total: Values = np.cumsum(steps)
    least = np.minimum.accumulate(total)
    np.minimum(least, 0.0, out=least)
    total -= least
    return total


def _side(up: bool, values: Values, k: float, share: float, pieces: list[tuple[int, int]]) -> _Side:
    every = np.empty(len(values))
    begins, ends, tops = [], [], []
    for first, stop in pieces:
        found = every[first:stop] = sums(values[first:stop] - k)
        rests = np.flatnonzero(found == 0.0)
        edges = rests if len(rests) and rests[0] == 0 else np.concatenate(([0], rests))
        top = np.maximum.reduceat(found, edges)
        rising = top > 0.0
        begins.append(edges[rising] + first)
        ends.append(np.append(edges[1:], stop - first)[rising] + first)
        tops.append(top[rising])
    none: NDArray[np.int64] = np.empty(0, np.int64)
    return _Side(
        up,
        values,
        k,
        share,
        every,
        np.concatenate([none, *begins]),
        np.concatenate([none, *ends]),
        np.concatenate([np.empty(0), *tops]),
    )


def _walk(
    side: _Side,
    begin: int,
    end: int,
    h: float,
    level: float,
    start: float,
    hold: bool,
    found: list[int],
    to_rest: bool = False,
) -> int:
    """Step from ``begin`` as the engine does; appends signals, gives where it stopped: at ``end``,
    or just after the first rest."""
    k = side.k
    block = begin
    while block < end:
        stop = min(block + 4_096, end)
        for at, value in enumerate(side.values[block:stop].tolist(), block):
            level = level + value - k
            if level < 0.0:
                level = 0.0
            if level > h:
                found.append(at)
                if not hold:
                    level = start
            if to_rest and level == 0.0:
                return at + 1
        block = stop
    return end
