"""What a drift does to readings, as a gauge would show it: on its grid, and no better.

Knows values and the gauge's step. Must not know streams, subgroups or detectors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from replay.readings import Places, StreamReadings, Values
from replay.tuning.result import Shape

_SHOWN = 200_000
_WHOLE = 1e-6


@dataclass(frozen=True, slots=True)
class Drift:
    """What is put in: ``amount`` in the gauge's unit, for a spread times sigma; a ramp grows over
    ``ramp`` readings. ``step`` is the gauge's, None where it has none."""

    shape: Shape
    amount: float
    ramp: int
    step: float | None
    plausible: tuple[float, float]


def drifted(
    value: Values, since: Places, side: Places, centre: Values, drift: Drift, chance: Values
) -> Values:
    """``value`` with the drift in readings ``since`` ≥ 0 after the onset, on the gauge's grid.

    A value between two steps goes to either, by chance, so that it is right on average.
    """
    match drift.shape:
        case "step":
            more = side * drift.amount
        case "ramp":
            more = side * drift.amount * np.minimum((since + 1) / drift.ramp, 1.0)
        case "spread":
            more = (drift.amount - 1.0) * (value - centre)
    changed: Values = value + more
    if drift.step is not None:
        steps = changed / drift.step
        near = np.round(steps)
        exact = np.abs(steps - near) < _WHOLE
        changed = np.where(exact, near, np.floor(steps + chance)) * drift.step
    return np.where(since >= 0, changed, value)


def resolution(streams: Sequence[StreamReadings]) -> float | None:
    """The gauge's step: the largest that all readings looked at are whole numbers of, where it is
    some fraction of 1, 2 or 5; None where they lie on no such grid."""
    seen = np.concatenate([each.value[: _SHOWN // max(len(streams), 1)] for each in streams])
    distinct = np.unique(seen)
    if len(distinct) < 2:
        return None
    for exponent in range(3, -7, -1):
        for digit in (5.0, 2.0, 1.0):
            step = digit * 10.0**exponent
            steps = distinct / step
            if np.all(np.abs(steps - np.round(steps)) < _WHOLE):
                return float(step)
    return None
