"""Run lengths of charts of location that signal at one point beyond their limits, and the inverse.

Knows the normal distribution and that of its median. Must not know patterns, sigma or streams.
"""

from __future__ import annotations

import math

from monitor.methods.constants import median_se
from monitor.methods.medians import median_sf
from monitor.methods.normal import sf, upper_quantile
from monitor.methods.runlength.chains import Side
from monitor.methods.runlength.roots import increasing_root


def run_length(width: float, shift: float = 0.0, *, direction: Side = "both") -> float:
    """Average run length of a chart of means or individuals.

    Check: width 3: 370.4 at shift 0, 43.9 at 1, 6.30 at 2.
    """
    return interval(_sides(sf(width - shift), sf(width + shift), direction))


def width_for(wanted: float, shift: float = 0.0, *, direction: Side = "both") -> float:
    """The width whose run length at ``shift`` is ``wanted`` > 1: a quantile of the normal."""
    if direction != "both":
        return upper_quantile(1 / wanted) + (shift if direction == "up" else -shift)
    if shift == 0:
        return upper_quantile(0.5 / wanted)
    guess = abs(shift) + max(0.1, upper_quantile(1 / wanted))
    return increasing_root(
        lambda width: math.log(run_length(width, shift) / wanted), guess, guess - abs(shift)
    )


def median_run_length(
    n: int, width: float, shift: float = 0.0, *, direction: Side = "both"
) -> float:
    """Average run length of a chart of medians of ``n``; width and shift in the median's standard
    errors, its tails exact rather than normal."""
    se = median_se(n)
    up, down = median_sf((width - shift) * se, n), median_sf((width + shift) * se, n)
    return interval(_sides(up, down, direction))


def median_width_for(n: int, wanted: float, *, direction: Side = "both") -> float:
    """The width whose run length on medians of ``n`` in control is ``wanted`` > 1."""
    guess = upper_quantile((0.5 if direction == "both" else 1.0) / wanted)
    return increasing_root(
        lambda width: math.log(median_run_length(n, width, direction=direction) / wanted),
        max(0.1, guess),
        max(0.1, guess),
    )


def interval(probability: float) -> float:
    """Points between signals of this probability each; inf where it is none."""
    return 1 / probability if probability > 0 else math.inf


def _sides(up: float, down: float, direction: Side) -> float:
    if direction == "both":
        return up + down
    return up if direction == "up" else down
