"""How far a distribution is from normal: skewness, tails, and what they do to the tail of a chart.

Knows moments. Must not know charts.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.methods import chi_square
from monitor.methods.normal import Array, sf


@dataclass(frozen=True, slots=True)
class Shape:
    """Skewness and excess kurtosis (both 0 for a normal distribution) of ``count`` values, with
    their standard errors for normal ones."""

    count: float
    skewness: float
    kurtosis: float

    @property
    def skewness_error(self) -> float:
        """√(6/N), to first order."""
        return math.sqrt(6 / self.count)

    @property
    def kurtosis_error(self) -> float:
        """√(24/N), to first order."""
        return math.sqrt(24 / self.count)


def shape(values: Array, effective: float | None = None) -> Shape | None:
    """Moment coefficients g1 and g2 (R. A. Fisher 1925; NIST/SEMATECH e-Handbook 1.3.5.11).

    ``effective`` is the number of independent values they are worth. None where nothing varies.
    """
    if len(values) < 4:
        return None
    deviation = values - values.mean()
    second = float((deviation**2).mean())
    if second <= 0:
        return None
    third, fourth = float((deviation**3).mean()), float((deviation**4).mean())
    return Shape(effective or len(values), third / second**1.5, fourth / second**2 - 3)


def skewed_sf(width: float, skewness: float) -> float:
    """P(Z > width) of a standardised value with that skewness, by K. Pearson's type III: a
    chi-squared value with 8/skewness² degrees of freedom, whole ones, centred and scaled."""
    freedom = round(8 / skewness**2) if skewness else 10**9
    if freedom > 100_000:
        return sf(width)
    freedom = max(1, freedom)
    at = width * math.sqrt(2 * freedom)
    if skewness > 0:
        return chi_square.sf(freedom + at, freedom) if freedom + at > 0 else 1.0
    return chi_square.cdf(freedom - at, freedom) if freedom - at > 0 else 0.0


def tilt(k: float, skewness: float) -> float:
    """The θ > 0 with E exp(θ(Z − k)) = 1, of a standardised value Z with that skewness (Pearson
    type III): a CUSUM with reference ``k`` rings about as often as exp(−θh) says. 2k if normal.

    J. F. C. Kingman 1964, J. London Mathematical Society 39 (the tail of the sums' maximum).
    """
    if abs(skewness) < 1e-6:
        return 2 * k

    def excess(theta: float) -> float:
        # Cumulants of type III: log E exp(θZ) = −(4/g²)·log(1 − gθ/2) − 2θ/g.
        inside = 1 - skewness * theta / 2
        if inside <= 0:
            return math.inf
        return -4 / skewness**2 * math.log(inside) - 2 * theta / skewness - theta * k

    low, high = 1e-9, 2 * k
    while excess(high) < 0:
        high *= 2
    for _ in range(80):
        middle = (low + high) / 2
        low, high = (middle, high) if excess(middle) < 0 else (low, middle)
    return (low + high) / 2


def smallest_step(values: Array) -> float:
    """The smallest difference between two different values: the gauge's resolution, where it shows.

    0 where all values are alike.
    """
    distinct = np.unique(values)
    if len(distinct) < 2:
        return 0.0
    return float(np.diff(distinct).min())
