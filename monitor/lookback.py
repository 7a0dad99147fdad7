"""The last subgroups of a stream, for looking back at when a shift began.

Knows standardised means, their subgroups' sizes and when those began. Must not know detectors or
alerts.
"""

from __future__ import annotations

from array import array
from collections.abc import Callable, Sequence
from typing import Any, NamedTuple

import numpy as np

from monitor.methods.onset import LOOK_BACK, estimate
from monitor.outputs import Evidence
from monitor.plan import Direction

_CLIP = 6.0


class Shift(NamedTuple):
    """A shift of the mean: ``size`` in the characteristic's unit, signed; times in microseconds.

    It began about ``onset``, somewhere from ``earliest`` (None: perhaps before the look-back) to
    ``latest``.
    """

    size: float
    onset: int
    earliest: int | None
    latest: int


_VALUES = array("d", [0.0]) * LOOK_BACK
_FIRST = array("q", [0]) * LOOK_BACK


class LookBack:
    """A ring of the last ``LOOK_BACK`` subgroups: 3 kB, as ten thousand streams have one each."""

    __slots__ = ("_count", "_fall_over", "_first", "_rise_over", "_size", "_sizes", "_values")

    def __init__(self) -> None:
        # At their full length from the start: growing, they would leave holes in memory.
        self._values, self._first = _VALUES[:], _FIRST[:]
        self.clear()

    def append(self, z: float, first: int, size: int) -> None:
        """A subgroup of ``size`` with standardised mean ``z``, its first reading at ``first``."""
        at = self._count % LOOK_BACK
        self._values[at] = z
        self._first[at] = first
        if size != self._size:
            self._vary(size)
        if self._sizes is not None:
            self._sizes[at] = size
        self._count += 1

    def clear(self) -> None:
        """Forget all: what comes does not continue what was."""
        self._count = self._size = 0
        self._sizes: array[int] | None = None
        self._rise_over = self._fall_over = 0

    def forget(self, direction: Direction) -> None:
        """A shift that way is over, and must not pass for the onset of the next."""
        if direction == "up":
            self._rise_over = self._count
        else:
            self._fall_over = self._count

    def evidence(self) -> Evidence:
        """All of it, the newest last."""
        values, first, sizes = self._held()
        return Evidence(tuple(first), tuple(values), tuple(sizes))

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        held = [ring.tolist() for ring in self._held()]
        return [self._count, self._rise_over, self._fall_over, *held]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        count, rise_over, fall_over, *held = state
        self._count = count - len(held[0])
        self._size = next(iter(held[2]), 0)
        for each in zip(*held, strict=True):
            self.append(*each)
        self._rise_over, self._fall_over = rise_over, fall_over

    def shift(self, direction: Direction, error: Callable[[int], float]) -> Shift:
        """The shift in ``direction`` that lasts to the newest subgroup; ``error`` gives the
        standard error of a subgroup's mean by its size.

        Its size is the mean of the subgroups since, each weighted by the inverse of its variance.
        ValueError where none came since the start, or since that direction was forgotten.
        """
        over = self._rise_over if direction == "up" else self._fall_over
        skip = max(0, over - self._count + min(self._count, LOOK_BACK))
        values, first, sizes = self._held()
        # One wild value long ago, which a clipped detector rightly passed over, is no onset.
        clipped = np.clip(values[skip:], -_CLIP, _CLIP)
        onset = estimate(clipped, 1 if direction == "up" else -1)
        start, newest = skip + onset.index, error(sizes[-1])
        since = [
            (z, newest / error(size)) for z, size in zip(values[start:], sizes[start:], strict=True)
        ]
        size = sum(z * weight for z, weight in since) / sum(weight**2 for _, weight in since)
        return Shift(
            size=size * newest,
            onset=first[start],
            # The shift began after the last unshifted subgroup had begun.
            earliest=None if onset.first is None else first[skip + max(onset.first - 1, 0)],
            latest=first[skip + onset.last],
        )

    def _vary(self, size: int) -> None:
        """Sizes are kept one by one only once they vary: most subgroups are all of one size."""
        if self._count and self._sizes is None:
            self._sizes = array("I", [self._size]) * LOOK_BACK
        self._size = size

    def _held(self) -> tuple[array[float], array[int], array[int]]:
        """Standardised means, beginnings and sizes, the newest last."""
        count, at = self._count, self._count % LOOK_BACK
        older, newer = slice(at, LOOK_BACK if count >= LOOK_BACK else at), slice(at)
        sizes = array("I", [self._size]) * LOOK_BACK if self._sizes is None else self._sizes
        return (
            self._values[older] + self._values[newer],
            self._first[older] + self._first[newer],
            sizes[older] + sizes[newer],
        )
