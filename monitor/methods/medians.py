"""The median of n independent standard normal values: its tail and its standard error.

Knows one distribution. Must not know charts, sigma or limits.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from monitor.methods.normal import Array, density, sf_array
from monitor.methods.quadrature import gauss_legendre


def median_density(s: Array, n: int) -> Array:
    """Density of the median of ``n`` ≥ 1 values, the mean of the middle two for an even n, at each
    ``s`` of shape (m,): from the middle order statistics (H. A. David, Order Statistics, 2.2)."""
    below = (n - 1) // 2  # values on either side of the middle one, or of the middle two
    log_ways = math.lgamma(n + 1) - 2 * math.lgamma(below + 1)
    if n % 2:
        orders = below * (np.log(sf_array(-s)) + np.log(sf_array(s)))
        return np.asarray(density(s) * np.exp(log_ways + orders))
    # The middle two are s ∓ d; given s, the density falls off in d like exp(−0.4·n·d) or faster.
    nodes, weights = gauss_legendre(80)
    half = min(9.0, 60.0 / n) / 2
    middle, d = s[:, None], half * (nodes + 1)[None, :]
    orders = below * (np.log(sf_array(d - middle)) + np.log(sf_array(middle + d)))
    return np.asarray(np.exp(log_ways + orders - middle**2 - d**2) @ weights * (half / math.pi))


@lru_cache(maxsize=1024)
def median_standard_error(n: int) -> float:
    """Standard error of the median of ``n`` ≥ 1 values; the trapezoidal rule is exact to rounding
    for a density that is analytic and vanishes at both ends."""
    s = np.linspace(-1, 1, 201) * _reach(n)
    weight = median_density(s, n)
    return math.sqrt(float(weight @ (s * s)) / float(weight.sum()))


def median_sf(x: float, n: int) -> float:
    """P(median > x), to a relative precision of 1e-9 for x ≥ 0."""
    if x < 0:
        return 1 - median_sf(-x, n)
    nodes, weights = gauss_legendre(60)
    half = _reach(n) / 2
    return float(median_density(x + half * (nodes + 1), n) @ weights * half)


def _reach(n: int) -> float:
    """Ten standard errors, or a little more."""
    return 10.0 * min(1.0, 1.26 / math.sqrt(n))
