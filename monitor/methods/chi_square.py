"""The chi-squared distribution, both tails to full relative precision.

Knows one distribution. Must not know variances or charts.
"""

from __future__ import annotations

import math

import numpy as np

from monitor.methods.normal import Array


def sf(x: float, freedom: int) -> float:
    """P(X > x) for x ≥ 0 and ``freedom`` ≥ 1 degrees of freedom.

    The finite sum of e^−y·yᵃ/Γ(a+1), a = ν/2 − 1, ν/2 − 2 …, with y = x/2 (Abramowitz & Stegun
    26.4.4 and 26.4.5): every term is positive.
    """
    y = x / 2
    if y == 0:
        return 1.0
    powers = np.arange(freedom // 2, dtype=np.float64) + (0.5 if freedom % 2 else 0.0)
    tail = float(_terms(powers, y).sum())
    return tail + math.erfc(math.sqrt(y)) if freedom % 2 else tail


def cdf(x: float, freedom: int) -> float:
    """P(X ≤ x): the same terms from a = ν/2 on, without end (Abramowitz & Stegun 26.4.6)."""
    y = x / 2
    if y == 0:
        return 0.0
    if y > freedom:  # far into the upper tail, where the series would be long and the answer near 1
        return 1 - sf(x, freedom)
    terms = 60 + int(y + 12 * math.sqrt(y))
    return float(_terms(freedom / 2 + np.arange(terms, dtype=np.float64), y).sum())


def _terms(powers: Array, y: float) -> Array:
    """e^−y·yᵃ/Γ(a+1) for powers a that rise by ones."""
    if not powers.size:
        return powers
    logs = np.log(y / powers[1:]).cumsum()
    first = powers[0] * math.log(y) - y - math.lgamma(powers[0] + 1)
    return np.asarray(np.exp(first + np.concatenate(([0.0], logs))))
