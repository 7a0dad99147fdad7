"""Shewhart limits of spread charts, at a width in standard errors of the charted statistic.

Knows the formulas of ISO 7870-2. Must not know where sigma came from or what a signal means.
"""

from __future__ import annotations

from typing import NamedTuple

from monitor.methods.constants import c4, c5, d2, d3


class Limits(NamedTuple):
    """Centre line and limits, in the characteristic's unit; ``lower`` is never below 0."""

    centre: float
    lower: float
    upper: float


def range_limits(n: int, sigma: float, width: float) -> Limits:
    """Range of ``n`` ≥ 2 readings: (d2 ± width·d3)·sigma."""
    return _about(d2(n), d3(n), sigma, width)


def sd_limits(n: int, sigma: float, width: float) -> Limits:
    """Standard deviation of ``n`` ≥ 2 readings: (c4 ± width·√(1 − c4²))·sigma."""
    return _about(c4(n), c5(n), sigma, width)


def moving_range_limits(sigma: float, width: float) -> Limits:
    """Moving range of successive readings: the range of two."""
    return range_limits(2, sigma, width)


def _about(mean: float, se: float, sigma: float, width: float) -> Limits:
    return Limits(mean * sigma, max(0.0, mean - width * se) * sigma, (mean + width * se) * sigma)
