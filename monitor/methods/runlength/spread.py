"""Run lengths of spread charts that signal at one point beyond their limits, and the inverse.

Knows the exact distributions of range, standard deviation, variance and moving range of normal
readings. Must not know sigma or streams: a spread is given as its ratio to the baseline's.
"""

from __future__ import annotations

import math
from typing import Literal

import numpy as np

from monitor.methods import chi_square
from monitor.methods.limits import (
    WIDEST,
    moving_range_limits,
    range_limits,
    sd_limits,
    variance_limits,
)
from monitor.methods.normal import Array, density, sf, sf_array, upper_quantile
from monitor.methods.ranges import range_cdf, range_sf
from monitor.methods.runlength.chains import Side, steps_to_absorption
from monitor.methods.runlength.shewhart import interval

Statistic = Literal["range", "sd", "variance"]

_APART = 12.0
"""Sigmas that no two readings lie apart."""


def run_length(
    statistic: Statistic,
    n: int,
    width: float,
    ratio: float = 1.0,
    *,
    direction: Side = "both",
    exact: bool = False,
) -> float:
    """Average run length of a chart of subgroups of ``n`` ≥ 2 with limits at ``width``, when the
    spread of readings is ``ratio`` times the baseline's.

    A variance's limits are always exact. A lower limit at 0 never signals. Check: n 5, width 3:
    range 217, sd 256; exact: 370.4.
    """
    match statistic:
        case "range":
            limits = range_limits(n, 1.0, width, exact=exact)
        case "sd":
            limits = sd_limits(n, 1.0, width, exact=exact)
        case "variance":
            limits = variance_limits(n, 1.0, width)
    scale = ratio * ratio if statistic == "variance" else ratio
    beyond = 0.0
    if direction != "down":
        beyond += _above(statistic, n, limits.upper / scale)
    if direction != "up" and limits.lower > 0:
        beyond += _below(statistic, n, limits.lower / scale)
    return interval(beyond)


def exact_width_for(wanted: float, *, direction: Side = "both") -> float:
    """The width of exact limits whose run length is ``wanted``, for any statistic and subgroup:
    each side watched has an equal part of the risk. ValueError where it cannot be so short, or
    so long."""
    sides = 2 if direction == "both" else 1
    if not 2 / sides < wanted < interval(sides * sf(WIDEST)):
        raise ValueError("no setting gives that run length")
    return upper_quantile(1 / (sides * wanted))


def moving_range_run_length(
    width: float, ratio: float = 1.0, *, direction: Side = "both", exact: bool = False
) -> float:
    """Average run length, in readings, of a chart of moving ranges of two.

    Neighbouring moving ranges share a reading, so a Markov chain on the reading (S. V.
    Crowder 1987, J. Quality Technology 19); by Simpson's rule on steps that divide the limit. A
    lasting shift of the mean moves only the one moving range that spans its onset.
    """
    limits = moving_range_limits(1.0, width, exact=exact)
    lower = limits.lower / ratio if direction != "up" else 0.0
    upper = limits.upper / ratio if direction != "down" else math.inf
    if upper == math.inf and lower == 0:
        return math.inf
    limit = min(upper, _APART)
    within = math.ceil(8 * limit)
    step = limit / within
    reach = math.ceil(8.5 / step)
    x = step * np.arange(
        reach + 1, dtype=np.float64
    )  # a reading and its mirror image have the same run length
    moves = _neighbours(x[:, None] - x, step, within) + _neighbours(x[:, None] + x, step, within)
    weights = density(x) * step
    moves *= weights
    moves[:, 0] /= 2  # 0 is its own mirror image
    beyond = sf_array(limit - x) + sf_array(limit + x) if upper < math.inf else np.zeros(x.size)
    # A lower limit is so small that it ends the run where the chain would stay: on the diagonal.
    # P(|reading − x| < lower), by Taylor, as the difference of two tails would have no digits.
    beyond += 2 * lower * density(x) * (1 + lower * lower * (x * x - 1) / 6)
    steps = steps_to_absorption(moves, beyond)
    return 1 + float(2 * weights[1:] @ steps[1:] + weights[0] * steps[0])


def _neighbours(apart: Array, step: float, within: int) -> Array:
    """Simpson's weights, in steps, for readings up to ``within`` steps apart."""
    steps = np.rint(np.abs(apart) / step)
    inner = np.where((within - steps) % 2 == 1, 4 / 3, 2 / 3)
    return np.where(steps < within, inner, np.where(steps == within, 1 / 3, 0.0))


def _above(statistic: Statistic, n: int, limit: float) -> float:
    if statistic == "range":
        return float(range_sf(np.array([limit]), n)[0])
    return chi_square.sf((n - 1) * _square(statistic, limit), n - 1)


def _below(statistic: Statistic, n: int, limit: float) -> float:
    if statistic == "range":
        return float(range_cdf(np.array([limit]), n)[0])
    return chi_square.cdf((n - 1) * _square(statistic, limit), n - 1)


def _square(statistic: Statistic, limit: float) -> float:
    return limit if statistic == "variance" else limit * limit
