"""Run lengths of spread charts that signal at one point beyond their limits, and the inverse.

Knows the exact distributions of range, standard deviation, variance and moving range of normal
readings. Must not know sigma or streams: a spread is given as its ratio to the baseline's.
"""

from __future__ import annotations

import math
from typing import Literal

import numpy as np

from monitor.methods import chi_square
from monitor.methods.constants import c4, c5, d2, d3
from monitor.methods.normal import Array, density, sf_array
from monitor.methods.ranges import range_cdf, range_sf
from monitor.methods.runlength.chains import Side, steps_to_absorption
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.shewhart import interval

Statistic = Literal["range", "sd", "variance"]


def run_length(
    statistic: Statistic, n: int, width: float, ratio: float = 1.0, *, direction: Side = "both"
) -> float:
    """Average run length of a chart of subgroups of ``n`` ≥ 2, its limits ``width`` standard errors
    of the statistic from its mean, when the spread of readings is ``ratio`` times the baseline's.

    A lower limit at or below 0 never signals. Check: n 5, width 3: range 217, sd 256.
    """
    mean, se = _moments(statistic, n)
    scale = ratio * ratio if statistic == "variance" else ratio
    beyond = 0.0
    if direction != "down":
        beyond += _above(statistic, n, (mean + width * se) / scale)
    if direction != "up" and mean > width * se:
        beyond += _below(statistic, n, (mean - width * se) / scale)
    return interval(beyond)


def width_for(
    statistic: Statistic, n: int, wanted: float, ratio: float = 1.0, *, direction: Side = "both"
) -> float:
    """The width whose run length is ``wanted``, to 1e-7 of it."""

    def excess(width: float) -> float:
        length = run_length(statistic, n, width, ratio, direction=direction)
        return math.log(length / wanted)

    return increasing_root(excess, 3.0, 2.5)


def moving_range_run_length(width: float, ratio: float = 1.0) -> float:
    """Average run length, in readings, of a chart of moving ranges of two.

    Neighbouring moving ranges share a reading, so a Markov chain on the reading (S. V.
    Crowder 1987, J. Quality Technology 19); by Simpson's rule on steps that divide the limit. A
    lasting shift of the mean moves only the one moving range that spans its onset.
    """
    limit = (d2(2) + width * d3(2)) / ratio
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
    steps = steps_to_absorption(moves, sf_array(limit - x) + sf_array(limit + x))
    return 1 + float(2 * weights[1:] @ steps[1:] + weights[0] * steps[0])


def _neighbours(apart: Array, step: float, within: int) -> Array:
    """Simpson's weights, in steps, for readings up to ``within`` steps apart."""
    steps = np.rint(np.abs(apart) / step)
    inner = np.where((within - steps) % 2 == 1, 4 / 3, 2 / 3)
    return np.where(steps < within, inner, np.where(steps == within, 1 / 3, 0.0))


def _moments(statistic: Statistic, n: int) -> tuple[float, float]:
    if statistic == "range":
        return d2(n), d3(n)
    if statistic == "sd":
        return c4(n), c5(n)
    return 1.0, math.sqrt(2 / (n - 1))


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
