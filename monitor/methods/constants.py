"""Constants of subgroup statistics of a normal distribution, from their definitions.

Knows the moments of the range, the standard deviation and the median of n standard normal values.
Must not know sigma, widths or charts.
"""

from __future__ import annotations

import math
from functools import lru_cache

from monitor.methods.medians import median_standard_error
from monitor.methods.ranges import range_moments

_SERIES_FROM = 60


@lru_cache(maxsize=1024)
def c4(n: int) -> float:
    """Mean of the sample standard deviation (divisor n − 1) of ``n`` ≥ 2 values, in sigmas.

    √(2/(n−1))·Γ(n/2)/Γ((n−1)/2) (ISO 7870-2). Relative error below 1e-13 for any n: where the
    difference of log-gammas would lose digits, the ratio's asymptotic series is exact to rounding.
    """
    _at_least(2, n)
    x = (n - 1) / 2
    if n < _SERIES_FROM:
        return math.exp(math.lgamma(n / 2) - math.lgamma(x)) / math.sqrt(x)
    # Γ(x+½)/(Γ(x)√x), e.g. Graham, Knuth & Patashnik, Concrete Mathematics, exercise 9.60.
    y = 1 / x
    return 1 + y * (-1 / 8 + y * (1 / 128 + y * (5 / 1024 + y * (-21 / 32768 - y * 399 / 262144))))


def c5(n: int) -> float:
    """Standard deviation of the sample standard deviation of ``n`` ≥ 2 values: √(1 − c4²)."""
    return math.sqrt((1 - c4(n)) * (1 + c4(n)))


def d2(n: int) -> float:
    """Mean of the range of ``n`` ≥ 2 values, in sigmas: ∫[1 − Φⁿ − (1−Φ)ⁿ]dx (ISO 7870-2)."""
    _at_least(2, n)
    return range_moments(n)[0]


def d3(n: int) -> float:
    """Standard deviation of the range of ``n`` ≥ 2 values, in sigmas (ISO 7870-2)."""
    _at_least(2, n)
    return range_moments(n)[1]


def median_se(n: int) -> float:
    """Standard error of the median of ``n`` ≥ 1 values, in sigmas, exactly; the mean of the middle
    two for an even n. Check: n = 3 gives √(1 − √3/π), n = 4 0.5461, n = 5 0.5356."""
    _at_least(1, n)
    return median_standard_error(n)


def _at_least(least: int, n: int) -> None:
    if n < least:
        raise ValueError(f"a subgroup of {n} has no such statistic: it takes {least} or more")
