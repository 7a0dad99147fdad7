"""The last subgroups of a stream, for looking back at when a shift began.

Knows standardised means and the times their subgroups began and ended. Must not know detectors or alerts.
"""

from __future__ import annotations

from array import array
from typing import NamedTuple

from monitor.methods.onset import LOOK_BACK, estimate
from monitor.plan import Direction


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
    """A ring of the last ``LOOK_BACK`` subgroups (3 kB, since ten thousand streams have one each)."""

    __slots__ = ("_count", "_first", "_values")

    def __init__(self) -> None:
        self._values = array("d")
        self._first = array("q")
        self._count = 0

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

    def shift(self, direction: Direction) -> Shift:
        """The shift in ``direction`` that lasts to the newest subgroup. At least one is needed."""
        at = self._count % LOOK_BACK if len(self._values) == LOOK_BACK else 0
        onset = estimate(self._values[at:] + self._values[:at], 1 if direction == "up" else -1)
        first = self._first[at:] + self._first[:at]
        return Shift(
            size=onset.size,
            onset=first[onset.index],
            # The shift began after the last unshifted subgroup had begun.
            earliest=None if onset.first is None else first[max(onset.first - 1, 0)],
            latest=first[onset.last],
        )
