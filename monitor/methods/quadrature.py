"""Gauss–Legendre nodes, computed once; and integrals over a part of where they lie.

Knows one rule of integration. Must not know what is integrated.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.polynomial.legendre import legvander

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


def upto(n: int, ends: Array) -> Array:
    """Weights at :func:`gauss_legendre`'s n nodes for integrals from −1 to each of ``ends`` ≤ 1,
    shape (ends, n): exact for polynomials of a degree below n.

    Those of the polynomial through the nodes, expanded in Legendre's: the integral of the d-th is
    (P(d + 1) − P(d − 1)) / (2d + 1) (Abramowitz & Stegun 22.7.10 and 22.8.5).
    """
    nodes, weights = gauss_legendre(n)
    degrees, at_ends = np.arange(n), legvander(ends, n)
    integrals = np.empty((ends.size, n))
    integrals[:, 0] = ends + 1
    integrals[:, 1:] = (at_ends[:, 2:] - at_ends[:, :-2]) / (2 * degrees[1:] + 1)
    return np.asarray(integrals @ (legvander(nodes, n - 1) * (degrees + 0.5)).T * weights)
