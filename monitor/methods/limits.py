"""Shewhart limits of spread charts: at a width in standard errors of the charted statistic, or
exact, crossed as often as a normal statistic crosses that width.

Knows the formulas of ISO 7870-2. Must not know where sigma came from or what a signal means.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from monitor.methods import chi_square, ranges
from monitor.methods.constants import c4, c5, d2, d3
from monitor.methods.normal import sf, upper_quantile


class Limits(NamedTuple):
    """Centre line and limits, in the characteristic's unit; ``lower`` is never below 0."""

    centre: float
    lower: float
    upper: float


_SMALL = 1e-4
WIDEST = 10.0
"""Of exact limits: a signal in 10²³ points, and as far as the tails of ranges are computed."""


def range_limits(n: int, sigma: float, width: float, *, exact: bool = False) -> Limits:
    """Range of ``n`` ≥ 2 readings: (d2 ± width·d3)·sigma, or exact."""
    if not exact:
        return _about(d2(n), d3(n), sigma, width)
    tail = _tail(width)
    lower, upper = ranges.range_lower_point(tail, n), ranges.range_upper_point(tail, n)
    return Limits(d2(n) * sigma, lower * sigma, upper * sigma)


def sd_limits(n: int, sigma: float, width: float, *, exact: bool = False) -> Limits:
    """Standard deviation of ``n`` ≥ 2 readings: (c4 ± width·√(1 − c4²))·sigma, or exact."""
    if not exact:
        return _about(c4(n), c5(n), sigma, width)
    lower, upper = _mean_squares(n, width)
    return Limits(c4(n) * sigma, math.sqrt(lower) * sigma, math.sqrt(upper) * sigma)


def variance_limits(n: int, sigma: float, width: float) -> Limits:
    """Variance of ``n`` ≥ 2 readings, in the unit squared: sigma²·χ²/(n − 1), always exact."""
    lower, upper = _mean_squares(n, width)
    square = sigma * sigma
    return Limits(square, lower * square, upper * square)


def moving_range_limits(sigma: float, width: float, *, exact: bool = False) -> Limits:
    """Moving range of successive readings: the range of two; exact, a normal's distance from 0."""
    if not exact:
        return range_limits(2, sigma, width)
    tail, scale = _tail(width), math.sqrt(2.0) * sigma
    upper, half = upper_quantile(tail / 2), tail / 2
    # Near the middle, where ½ less a small tail has few digits, by the series of the quantile.
    lower = upper_quantile(0.5 - half)
    if half < _SMALL:
        lower = math.sqrt(2 * math.pi) * half * (1 + math.pi * half * half / 3)
    return Limits(d2(2) * sigma, lower * scale, upper * scale)


def _mean_squares(n: int, width: float) -> tuple[float, float]:
    tail, freedom = _tail(width), n - 1
    if freedom < 1:
        raise ValueError(f"a subgroup of {n} has no variance: it takes 2 or more")
    lower, upper = chi_square.lower_point(tail, freedom), chi_square.upper_point(tail, freedom)
    return lower / freedom, upper / freedom


def _tail(width: float) -> float:
    if not 0 < width <= WIDEST:
        raise ValueError(f"exact limits take a width above 0, up to {WIDEST:g}, not {width:g}")
    return sf(width)


def _about(mean: float, se: float, sigma: float, width: float) -> Limits:
    return Limits(mean * sigma, max(0.0, mean - width * se) * sigma, (mean + width * se) * sigma)
