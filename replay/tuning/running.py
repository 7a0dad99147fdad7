"""Running time: how long a characteristic was measured, its pauses left out, and its parts.

Knows instants of readings. Must not know values or detectors.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from monitor.times import SECOND
from replay.readings import StreamReadings, Times, Values

_PAUSE = 3_600 * SECOND
_USUAL = 20
"""A pause is longer than an hour, and than so many times what usually lies between readings."""

FIT, PROVE = 0.59, 0.60
"""Shares of running time: settings are fitted up to the first, and proved from the second on."""


class Running:
    """Maps instants (µs) to seconds of running time since the first reading of any stream."""

    def __init__(self, streams: Sequence[StreamReadings]) -> None:
        times = np.concatenate([each.time for each in streams])
        if len(streams) > 1:
            times.sort(kind="stable")
        gaps = np.diff(times)
        usual = float(np.median(gaps)) if len(gaps) else 0.0
        pauses = gaps > max(_PAUSE, _USUAL * usual)
        # Between pauses both run alike, so their ends are all there is to know.
        ends = np.flatnonzero(pauses)
        at = np.concatenate(([0], np.column_stack((ends, ends + 1)).ravel(), [len(times) - 1]))
        instants = times[at]
        steps = np.diff(instants).astype(np.float64)
        steps[1::2] = 0.0
        self._instants = instants.astype(np.float64)
        self._seconds = np.concatenate(([0.0], np.cumsum(steps))) / SECOND
        self.first, self.last = int(times[0]), int(times[-1])

    @property
    def whole(self) -> float:
        """Of the whole recording."""
        return float(self._seconds[-1])

    def seconds(self, instants: Times) -> Values:
        """Running seconds at each instant; the shape is kept."""
        found: Values = np.interp(np.asarray(instants, np.float64), self._instants, self._seconds)
        return found

    def instant(self, share: float) -> int:
        """The instant at which that share of the running time has passed."""
        wanted = share * self.whole
        place = int(np.searchsorted(self._seconds, wanted, side="left"))
        if place == 0:
            return self.first
        before = self._seconds[place - 1]
        return int(self._instants[place - 1]) + round(float(wanted - before) * SECOND)
