"""The EWMA over arrays: signal for signal that of ``monitor.detectors``.

Knows averages and their variances. Must not know how limits are found or what a drift is.

After a restart the average forgets what was before as (1 − λ)ⁿ: it is walked number by number only
until nothing of it is left.
"""

from __future__ import annotations

import math

import numpy as np

from monitor.plan import EwmaPlan
from replay.readings import Values
from replay.tuning.grouped import GroupedStream
from replay.tuning.paths import Peaks, Signals, in_order, jointly, segments

_FORGOTTEN = 1e-14


class EwmaPath:
    """One EWMA over one stream, whatever the ``width`` of ``plan``."""

    def __init__(self, plan: EwmaPlan, stream: GroupedStream) -> None:
        self._plan, self._stream = plan, stream
        self._segments = list(segments(stream))
        self._away = np.empty(len(stream))
        self._deviation = np.empty(len(stream))
        lam = plan.lam
        away = stream.mean - stream.centre
        if plan.clip is not None:
            reach = plan.clip * stream.error
            away = np.clip(away, -reach, reach)
        self._inputs = away
        for first, stop in self._segments:
            self._away[first:stop] = recurrence(1 - lam, lam * away[first:stop])
            squares = stream.error[first:stop] ** 2
            if plan.asymptotic:
                variance = lam / (2 - lam) * squares
            else:
                variance = recurrence((1 - lam) ** 2, lam**2 * squares)
            self._deviation[first:stop] = np.sqrt(variance)

    def peaks(self) -> Peaks:
        """A cycle is a stay on one side of the centre; levels are widths."""
        found = []
        for first, stop in self._segments:
            level = self._away[first:stop] / self._deviation[first:stop]
            side = level > 0
            edges = np.concatenate(([0], np.flatnonzero(side[1:] != side[:-1]) + 1))
            if self._plan.direction == "both":
                level = np.abs(level)
            elif self._plan.direction == "down":
                level = -level
            top = np.maximum.reduceat(level, edges)
            ends = np.append(edges[1:], stop - first)
            kept = top > 0
            found.append(Peaks(top[kept], edges[kept] + first, ends[kept] + first))
        return jointly(found)

    def unit(self) -> float:
        """Root mean square: above 1 where neighbouring means follow each other."""
        kept = ~self._stream.left_out
        return float(np.sqrt(np.mean((self._away[kept] / self._deviation[kept]) ** 2)))

    def signals(self, limit: float) -> Signals:
        """With the width at ``limit``."""
        plan = self._plan
        at: list[int] = []
        up: list[bool] = []
        reach = limit * self._deviation
        beyond = np.flatnonzero(np.abs(self._away) > reach)
        watched = {True: plan.direction != "down", False: plan.direction != "up"}
        for first, stop in self._segments:
            low, high = np.searchsorted(beyond, (first, stop))
            settled = first
            for place in beyond[low:high].tolist():
                upper = bool(self._away[place] > 0)
                if place < settled or not watched[upper]:
                    continue
                at.append(place)
                up.append(upper)
                if not plan.hold:
                    settled = self._walk(place + 1, stop, limit, at, up)
        return in_order(at, up)

    def _walk(self, begin: int, end: int, width: float, at: list[int], up: list[bool]) -> int:
        """Step from a restart as the engine does, until it is forgotten; gives where."""
        plan, centre = self._plan, self._stream.centre
        lam, keep = plan.lam, 1 - plan.lam
        memory = 1 if lam >= 1 else math.ceil(math.log(_FORGOTTEN) / math.log(keep))
        upwards, downwards = plan.direction != "down", plan.direction != "up"
        average, variance = centre, 0.0
        since, block = begin, begin
        while block < end:
            stop = min(block + 512, end)
            inputs = (centre + self._inputs[block:stop]).tolist()
            errors = self._stream.error[block:stop].tolist()
            for place, x, se in zip(range(block, stop), inputs, errors, strict=True):
                if place - since >= memory:
                    return place
                average = lam * x + keep * average
                if plan.asymptotic:
                    variance = lam / (2 - lam) * se * se
                else:
                    variance = (lam * se) ** 2 + keep**2 * variance
                reach = width * math.sqrt(variance)
                if centre - reach <= average <= centre + reach:
                    continue
                upper = average > centre
                if upwards if upper else downwards:
                    at.append(place)
                    up.append(upper)
                    average, variance, since = centre, 0.0, place + 1
            block = stop
        return end


def recurrence(keep: float, inputs: Values) -> Values:
    """y ← keep·y + input from 0, for every input, 0 ≤ keep < 1: in blocks side by side, each then
    given what the one before left it."""
    count = len(inputs)
    length = max(1, math.isqrt(count))
    blocks = -(-count // length)
    table = np.zeros((length, blocks))
    padded = np.zeros(blocks * length)
    padded[:count] = inputs
    table[:] = padded.reshape(blocks, length).T
    for row in range(1, length):
        table[row] += keep * table[row - 1]
    left = np.empty(blocks)
    carried, over = 0.0, keep**length
    for block, last in enumerate(table[-1].tolist()):
        left[block] = carried
        carried = last + over * carried
    table += (keep ** np.arange(1, length + 1))[:, None] * left
    found: Values = table.T.ravel()[:count]
    return found
