"""The standard normal distribution: tails without loss of digits, on floats and on arrays.

Knows one distribution. Must not know charts or limits.
"""

from __future__ import annotations

import math
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_STANDARD = NormalDist()


def sf(x: float) -> float:
    """P(Z > x), with full relative precision far into the upper tail."""
    return 0.5 * math.erfc(x * math.sqrt(0.5))


def upper_quantile(p: float) -> float:
    """The x with P(Z > x) = p, for p in (0, 1) down to 1e-300."""
    return -_STANDARD.inv_cdf(p)


def density(x: Array) -> Array:
    """φ at each element; any shape."""
    return np.asarray(np.exp(-0.5 * x * x) * (1.0 / math.sqrt(2.0 * math.pi)))


def sf_array(x: Array) -> Array:
    """P(Z > x) at each element; any shape."""
    scaled = (x * math.sqrt(0.5)).ravel()
    tail = np.fromiter(map(math.erfc, scaled.tolist()), np.float64, scaled.size)
    return np.asarray(0.5 * tail.reshape(x.shape))


def sf_within(x: Array, low: float, high: float) -> Array:
    """:func:`sf_array` of each element limited to ``low`` and ``high``; any shape."""
    tail = np.where(x <= low, sf(low), sf(high))
    inside = (x > low) & (x < high)
    tail[inside] = sf_array(x[inside])
    return tail
