"""The last subgroups of a stream, for looking back at when a shift began.

Knows standardised means and the times their subgroups began. Must not know detectors or alerts.
"""

from __future__ import annotations

from array import array
from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np

from monitor.methods.onset import LOOK_BACK, estimate
from monitor.outputs import Evidence
from monitor.plan import Direction

_CLIP = 6.0


class Shift(NamedTuple):
    """A shift of the mean: ``size`` in standard errors, signed; times in microseconds.

    It began about ``onset``, somewhere from ``earliest`` (None: perhaps before the look-back) to
    ``latest``.
    """

    size: float
    onset: int
    earliest: int | None
    latest: int


class LookBack:
    """A ring of the last ``LOOK_BACK`` subgroups: 3 kB, as ten thousand streams have one each."""

    __slots__ = ("_count", "_first", "_from", "_values")

    def __init__(self) -> None:
        self._values = array("d")
        self._first = array("q")
        self._count = 0
        self._from: dict[Direction, int] = {"up": 0, "down": 0}

    def append(self, z: float, first: int) -> None:
        """A subgroup with standardised mean ``z`` whose first reading was at ``first``."""
        if len(self._values) < LOOK_BACK:
            self._values.append(z)
            self._first.append(first)
        else:
            at = self._count % LOOK_BACK
            self._values[at] = z
            self._first[at] = first
        self._count += 1

    def clear(self) -> None:
        """Forget all: what comes does not continue what was."""
        self.__init__()  # type: ignore[misc]

    def forget(self, direction: Direction) -> None:
        """A shift that way is over, and must not pass for the onset of the next."""
        self._from[direction] = self._count

    def evidence(self) -> Evidence:
        """All of it, the newest last."""
        at = self._count % LOOK_BACK if len(self._values) == LOOK_BACK else 0
        return Evidence(
            tuple(self._first[at:] + self._first[:at]), tuple(self._values[at:] + self._values[:at])
        )

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        return [self._count, list(self._values), list(self._first), self._from]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        self._count, values, first, forgotten = state
        self._values, self._first = array("d", values), array("q", first)
        self._from = dict(forgotten)

    def shift(self, direction: Direction) -> Shift:
        """The shift in ``direction`` that lasts to the newest subgroup.

        ValueError where none came since the start, or since that direction was forgotten.
        """
        length = len(self._values)
        at = self._count % length if length == LOOK_BACK else 0
        skip = max(0, length - (self._count - self._from[direction]))
        values = (self._values[at:] + self._values[:at])[skip:]
        first = (self._first[at:] + self._first[:at])[skip:]
        # One wild value long ago, which a clipped detector rightly passed over, is no onset.
        clipped = np.clip(values, -_CLIP, _CLIP)
        onset = estimate(clipped, 1 if direction == "up" else -1)
        since = values[onset.index :]
        return Shift(
            size=sum(since) / len(since),
            onset=first[onset.index],
            # The shift began after the last unshifted subgroup had begun.
            earliest=None if onset.first is None else first[max(onset.first - 1, 0)],
            latest=first[onset.last],
        )
