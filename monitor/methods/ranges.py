"""The range of n independent standard normal values: its distribution, points and two moments.

Knows one distribution. Must not know charts, sigma or limits.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache

import numpy as np

from monitor.methods.normal import Array, density, sf_array
from monitor.methods.quadrature import gauss_legendre

# The integrands are analytic and vanish at both ends, where the trapezoidal rule converges
# exponentially: a step of 0.05 is exact to rounding. The grid reaches as far as ranges of 20 need.
_STEP = 0.05
_GRID = np.arange(-20.0, 12.0 + _STEP / 2, _STEP)
_NARROW = 1e-5


@lru_cache(maxsize=1)
def _minimum() -> tuple[Array, Array, Array]:
    """At each x of the grid: φ(x), P(Z > x) and its logarithm."""
    tail = sf_array(_GRID)
    return density(_GRID), tail, np.log(tail)


def range_sf(w: Array, n: int) -> Array:
    """P(R > w) of the range R of ``n`` standard normal values; ``w`` ≥ 0 of shape (m,).

    Given the smallest value x the others all lie in (x, x + w] with probability
    (1 − Q(x+w)/Q(x))ⁿ⁻¹ (Tippett 1925, Biometrika 17); summed as complements, so that a tail of
    1e-15 keeps its digits. Absolute error below 1e-12.
    """
    return np.asarray(-np.expm1(_log_within(w, n)) @ _smallest(n))


def range_cdf(w: Array, n: int) -> Array:
    """P(R ≤ w): as :func:`range_sf`, keeping the digits of the lower tail."""
    # Where w is so small that 1 − Q(x+w)/Q(x) loses digits, it is w·φ(x + w/2)/Q(x).
    narrow = density(_GRID[None, :] + w[:, None] / 2) * w[:, None] / _minimum()[1]
    within = np.where(w[:, None] < _NARROW, (n - 1) * np.log(narrow), _log_within(w, n))
    return np.asarray(np.exp(within) @ _smallest(n))


@lru_cache(maxsize=1024)
def range_upper_point(p: float, n: int) -> float:
    """The w with P(R > w) = ``p``, for p down to 1e-25, to a relative precision of 1e-9."""
    return _point(p, n, range_sf, -1)


@lru_cache(maxsize=1024)
def range_lower_point(p: float, n: int) -> float:
    """The w with P(R ≤ w) = ``p``, for p down to 1e-25, to a relative precision of 1e-6."""
    return _point(p, n, range_cdf, 1)


def _point(p: float, n: int, tail: Callable[[Array, int], Array], sign: int) -> float:
    """Newton's method on log p in log w, kept inside the bracket that the tails have shown."""
    low, high = 1e-30, 20.0
    mean, sd = range_moments(n)
    w, slope = mean, sign * mean / sd
    value = math.log(float(tail(np.array([w]), n)[0]) / p)
    for _ in range(200):
        if value * sign > 0:
            high = w
        else:
            low = w
        following = w * math.exp(max(-3.0, min(3.0, -value / slope)))
        if not low < following < high:
            following = math.sqrt(low * high)
        if abs(following - w) <= 1e-11 * w:
            break
        there = math.log(max(float(tail(np.array([following]), n)[0]), 1e-300) / p)
        secant = (there - value) / math.log(following / w)
        slope = secant if secant * sign > 0 else slope
        w, value = following, there
    return w


def _log_within(w: Array, n: int) -> Array:
    """Logarithm of the probability that all others lie within ``w`` above each x of the grid."""
    beyond = sf_array(_GRID[None, :] + w[:, None]) / _minimum()[1]
    with np.errstate(divide="ignore"):  # w = 0: nothing lies within, log 0 is the right answer
        return np.asarray((n - 1) * np.log1p(-beyond))


def _smallest(n: int) -> Array:
    """The weight of each x of the grid as the smallest of ``n``."""
    phi, _, log_tail = _minimum()
    return np.asarray(_STEP * n * phi * np.exp((n - 1) * log_tail))


@lru_cache(maxsize=256)
def range_moments(n: int) -> tuple[float, float]:
    """Mean and standard deviation (d2, d3) of the range of ``n`` ≥ 2 standard normal values.

    E R = ∫P(R > w)dw and E R² = ∫2w·P(R > w)dw, by Gauss–Legendre on three panels.
    """
    nodes, weights = gauss_legendre(40)
    edges = np.array([0.0, 4.0, 8.0, 18.0])
    half = np.diff(edges) / 2
    w = (edges[:-1, None] + half[:, None] * (nodes + 1)).ravel()
    weight = (half[:, None] * weights).ravel()
    tail = range_sf(w, n)
    mean = float(weight @ tail)
    return mean, math.sqrt(float(weight @ (2 * w * tail)) - mean * mean)
