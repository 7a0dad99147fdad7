"""The chi-squared distribution: both tails to full relative precision, quantiles, partial means.

Knows one distribution. Must not know variances or charts.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from monitor.methods.normal import Array, upper_quantile


def sf(x: float, freedom: int) -> float:
    """P(X > x) for x ≥ 0 and ``freedom`` ≥ 1 degrees of freedom.

    The finite sum of e^−y·yᵃ/Γ(a+1), a = ν/2 − 1, ν/2 − 2 …, with y = x/2 (Abramowitz & Stegun
    26.4.4 and 26.4.5): every term is positive.
    """
    return float(sf_array(np.array([x]), freedom)[0])


def cdf(x: float, freedom: int) -> float:
    """P(X ≤ x): the same terms from a = ν/2 on, without end (Abramowitz & Stegun 26.4.6)."""
    if x / 2 > freedom:  # far up, where the series would be long and the answer near 1
        return 1 - sf(x, freedom)
    return float(cdf_array(np.array([x]), freedom)[0])


def sf_array(x: Array, freedom: int) -> Array:
    """:func:`sf` at each element of ``x``, shape (m,)."""
    y = x / 2
    powers = np.arange(freedom // 2, dtype=np.float64) + (0.5 if freedom % 2 else 0.0)
    tail = _terms(powers, y).sum(axis=1)
    if freedom % 2:
        tail += np.fromiter(map(math.erfc, np.sqrt(y).tolist()), np.float64, y.size)
    return np.where(y > 0, tail, 1.0)


def cdf_array(x: Array, freedom: int) -> Array:
    """:func:`cdf` at each element of ``x``, shape (m,), none above twice ``freedom``."""
    y = x / 2
    largest = float(y.max(initial=0.0))
    terms = 60 + int(largest + 12 * math.sqrt(largest))
    powers = freedom / 2 + np.arange(terms, dtype=np.float64)
    return np.where(y > 0, _terms(powers, y).sum(axis=1), 0.0)


@lru_cache(maxsize=1024)
def upper_point(p: float, freedom: int) -> float:
    """The x with P(X > x) = ``p``, for p from 1e-100 up to 1: Newton's method on log p, from the
    cube of a normal quantile (E. B. Wilson & M. M. Hilferty 1931, Proc. Nat. Acad. Sci. 17)."""
    return _point(p, freedom, -1) if p <= 0.5 else _point(1 - p, freedom, 1)


@lru_cache(maxsize=1024)
def lower_point(p: float, freedom: int) -> float:
    """The x with P(X ≤ x) = ``p``, as :func:`upper_point`."""
    return _point(p, freedom, 1) if p <= 0.5 else _point(1 - p, freedom, -1)


def _point(p: float, freedom: int, sign: int) -> float:
    """The point of the lower (+1) or upper (−1) tail, p ≤ ½; Newton's method in log x, where both
    tails' logarithms bend one way."""
    share = 2 / (9 * freedom)
    x = freedom * (1 - share - sign * upper_quantile(p) * math.sqrt(share)) ** 3
    # Far down, where the cube is poor or negative, the distribution is a power of x.
    log_gamma = math.lgamma(freedom / 2 + 1)
    power = 2 * math.exp((math.log(p) + log_gamma) * 2 / freedom)
    if sign > 0:
        x = max(x, power)
    x = max(x, 1e-300)
    for _ in range(100):
        tail = cdf(x, freedom) if sign > 0 else sf(x, freedom)
        log_density = (freedom / 2) * math.log(x / 2) - x / 2 - log_gamma + math.log(freedom / 2)
        step = sign * math.log(tail / p) * tail / math.exp(log_density)
        following = x * math.exp(-max(-1.0, min(1.0, step)))
        if abs(following - x) <= 1e-14 * x:
            return following
        x = following
    return x


def mean_above(x: Array, freedom: int) -> Array:
    """E max(X/ν − x, 0) at each element of ``x`` ≥ 0, shape (m,): the tail of the mean square."""
    a, y = freedom / 2, x * (freedom / 2)
    return np.asarray((1 - x) * sf_array(2 * y, freedom) + _terms(np.array([a]), y)[:, 0])


def mean_below(x: Array, freedom: int) -> Array:
    """E max(x − X/ν, 0) at each element of ``x`` from 0 to 2, shape (m,)."""
    a, y = freedom / 2, x * (freedom / 2)
    return np.asarray((x - 1) * cdf_array(2 * y, freedom) + _terms(np.array([a]), y)[:, 0])


def _terms(powers: Array, y: Array) -> Array:
    """e^−y·yᵃ/Γ(a+1) at each y (rows) for powers a that rise by ones (columns); 0 where y is 0."""
    if not powers.size:
        return np.zeros((y.size, 0))
    with np.errstate(divide="ignore", invalid="ignore"):
        log_y = np.log(y)
        logs = (log_y[:, None] - np.log(powers[1:])).cumsum(axis=1)
        first = powers[0] * log_y - y - math.lgamma(powers[0] + 1)
        terms = np.exp(first[:, None] + np.concatenate((np.zeros((y.size, 1)), logs), axis=1))
    return np.where(y[:, None] > 0, terms, 0.0)
