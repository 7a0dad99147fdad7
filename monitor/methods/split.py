"""Where a series is best cut in two pieces of different mean.

Knows a series of numbers. Must not know times, units or what may have happened there.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.methods.normal import Array


@dataclass(frozen=True, slots=True)
class Split:
    """``index``: of the first value after the cut; ``by``: the mean from there on less the mean
    before, in the series' unit; ``share``: of the sum of squares, what the cut explains, 0 to 1."""

    index: int
    by: float
    share: float


def split(series: Array) -> Split | None:
    """The cut of most likelihood where values are normal and neither mean is known (D. V. Hinkley
    1970, Biometrika 57); None of fewer than two values, or where nothing varies.

    A ramp is cut too, near its middle: a cut says when and by how much, not how suddenly.
    """
    count = len(series)
    centred = series - series.mean() if count else series
    squares = float(centred @ centred)
    if count < 2 or not squares > 0:
        return None
    sums = centred.cumsum()[:-1]
    before = np.arange(1, count, dtype=np.float64)
    explained = sums**2 * count / (before * (count - before))
    best = int(explained.argmax())
    by = -float(sums[best]) * count / (before[best] * (count - before[best]))
    share = min(1.0, float(explained[best]) / squares)
    return Split(best + 1, float(by), share) if math.isfinite(by) else None
