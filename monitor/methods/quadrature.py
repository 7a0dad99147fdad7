"""Gauss–Legendre nodes, computed once.

Knows one rule of integration. Must not know what is integrated.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from monitor.methods.normal import Array


@lru_cache(maxsize=128)
def gauss_legendre(n: int) -> tuple[Array, Array]:
    """Nodes and weights on (−1, 1), each of shape (n,); shared, so not to be written to."""
    nodes, weights = np.polynomial.legendre.leggauss(n)
    nodes.flags.writeable = weights.flags.writeable = False
    return nodes, weights
