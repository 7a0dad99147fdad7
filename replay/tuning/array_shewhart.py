"""The Shewhart chart of means over arrays, its rule ``outside``: as that of ``monitor.detectors``.

Knows single points. Must not know how limits are found or what a drift is.
"""

from __future__ import annotations

import numpy as np

from monitor.plan import ShewhartPlan
from replay.tuning.changed import resolution
from replay.tuning.grouped import GroupedStream
from replay.tuning.paths import Peaks, Signals


class ShewhartPath:
    """One chart of means or single readings over one stream, whatever the ``width`` of ``plan``."""

    def __init__(self, plan: ShewhartPlan, stream: GroupedStream) -> None:
        self._stream = stream
        self._upwards = plan.direction != "down"
        self._downwards = plan.direction != "up"

    def peaks(self) -> Peaks:
        """Every point is a cycle of its own.

        Single readings lie on the gauge's steps, and a tail of steps cannot be drawn on: by chance
        each is put where it may have been before it was rounded.
        """
        stream = self._stream
        value = stream.mean
        if np.all(stream.n == 1):
            step = resolution((stream.readings,))
            if step is not None:
                value = value + step * (np.random.default_rng(0).random(len(value)) - 0.5)
        level = (value - stream.centre) / stream.error
        if self._upwards and self._downwards:
            level = np.abs(level)
        elif self._downwards:
            level = -level
        at = np.flatnonzero(level > 0)
        return Peaks(level[at], at, at + 1)

    def unit(self) -> float:
        """That of the limits."""
        return 1.0

    def signals(self, limit: float) -> Signals:
        """With the width at ``limit``; limits as the engine's floats have them."""
        stream = self._stream
        reach = limit * stream.error
        above = stream.mean > stream.centre + reach
        below = stream.mean < stream.centre - reach
        beyond = (above & self._upwards) | (below & self._downwards)
        at = np.flatnonzero(beyond)
        return Signals(at, above[at])
