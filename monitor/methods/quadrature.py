"""Gauss–Legendre nodes, computed once.

Knows one rule of integration. Must not know what is integrated.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from monitor.methods.normal import Array


@lru_cache(maxsize=128)
def gauss_legendre(n: int) -> tuple[Array, Array]:
    """Nodes and weights on (−1, 1), each of shape (n,); shared, so not to be written to.

    The zeros of the Legendre polynomial by Newton's method (Abramowitz & Stegun 22.16.6 and
    25.4.29), to 1e-14: numpy, which looks for them as eigenvalues, takes up to ten times as long.
    """
    angle = np.pi * (4 * np.arange(n, 0, -1) - 1) / (4 * n + 2)
    nodes = np.cos(angle + 1 / (8 * n * n * np.tan(angle)))
    change = 1.0
    while change > 1e-15:
        before, value = np.ones(n), nodes
        for degree in range(2, n + 1):
            rise = nodes * value
            before, value = value, rise + (1 - 1 / degree) * (rise - before)
        slope = n * (nodes * value - before) / (nodes * nodes - 1)
        step = value / slope
        nodes, change = nodes - step, float(np.abs(step).max())
    weights = 2 / ((1 - nodes * nodes) * slope * slope)
    nodes.flags.writeable = weights.flags.writeable = False
    return nodes, weights
