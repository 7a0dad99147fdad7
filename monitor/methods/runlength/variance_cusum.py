"""Run lengths of the CUSUM of subgroup variances, and the decision interval for a wanted one.

Knows sums of mean squares of normal readings. Must not know sigma, streams or alerts: constants are
in multiples of the baseline's variance, a spread is given as its ratio to the baseline's.
"""

from __future__ import annotations

import math
from typing import Literal, NamedTuple

import numpy as np

from monitor.methods import chi_square
from monitor.methods.normal import Array
from monitor.methods.runlength.chains import steps_to_absorption
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import Wait, chain

Way = Literal["up", "down"]

_FEWEST_CELLS, _MOST_CELLS = 96, 600


def reference(ratio: float) -> float:
    """The k of the likelihood ratio for a spread of ``ratio`` times the baseline's.

    2·ln r·r²/(r² − 1), in multiples of the baseline's variance (D. M. Hawkins & D. H. Olwell 1998,
    Cumulative Sum Charts and Charting for Quality Improvement): above 1 for a spread that grows,
    between 0 and 1 for one that shrinks.
    """
    square = ratio * ratio
    return 2 * math.log(ratio) * square / (square - 1)


def tuned_to(k: float) -> float:
    """The ratio whose :func:`reference` is ``k`` > 0: where the sum signals soonest."""
    low, high = 1e-12, 1.0 + k * k  # reference(r) grows with r, and lies above √(r − 1)
    while reference(high) < k or high == 1.0:
        high *= 2
    for _ in range(80):
        middle = math.sqrt(low * high)
        below = reference(middle) < k if middle != 1 else k > 1
        low, high = (middle, high) if below else (low, middle)
    return high


def reference_within(ratio: float, interval: float, nu: int) -> float:
    """:func:`reference`, but nearer to 1 where the spread to be caught is so far from the usual one
    that any single subgroup shows it: then an h remains that signals once in ``interval``."""
    k = reference(ratio)
    if ratio > 1:
        point = chi_square.upper_point(1 / interval, nu) / nu
        return min(k, 1 + 0.8 * (point - 1)) if point > 1 else k
    point = chi_square.lower_point(1 / interval, nu) / nu
    return max(k, 1 / (1 + 0.8 * (1 / point - 1))) if point < 1 else k


def run_length(
    k: float, h: float, ratio: float = 1.0, *, nu: int, side: Way = "up", head_start: float = 0.0
) -> float:
    """Average run length of one sum of variances with ``nu`` ≥ 1 degrees of freedom each.

    C ← max(0, C + y − k), y = S²/σ² (``side`` down: + k − y), signalling above ``h``, started at
    ``head_start``·h, when the spread of readings is ``ratio`` times the baseline's. Relative error
    below 1e-3 (subgroups of two, or a k within 10 % of 1: 1e-2). ValueError for an h too high to
    compute.
    """
    return Sum(k, h, nu, side, head_start).from_zero_and_start(ratio)[1]


class Sum(NamedTuple):
    """One sum: what it is made of, as for :func:`run_length`."""

    k: float
    h: float
    nu: int
    side: Way
    head_start: float

    def from_zero_and_start(self, ratio: float) -> tuple[float, float]:
        """Run lengths from a sum of 0, and from the head start."""
        _refuse(self.h, self.nu)
        rough, close = (
            made.lengths(self.head_start) for made in (self._chain(ratio, 2), self._chain(ratio))
        )
        # The error of the run length falls with the square of the cells' width (Richardson).
        zero, started = (
            c * (c / r) ** (1 / 3) if r < math.inf else r for r, c in zip(rough, close, strict=True)
        )
        return zero, started

    def wait(self, ratio: float) -> Wait:
        """The chance to have given no signal yet, subgroup after subgroup."""
        _refuse(self.h, self.nu)
        moves, absorbed = self._chain(ratio)
        return chain(_start(self.head_start, absorbed.size), moves)

    def _chain(self, ratio: float, coarser: int = 1) -> _Chain:
        square = ratio * ratio  # y is square times a mean square: divide all by it
        k, h = self.k / square, self.h / square
        cells = _cells(k, h, self.nu, self.side) // coarser
        return _chain(k, h, self.nu, self.side, cells)


def decision_interval(
    k: float, wanted: float, *, nu: int, side: Way = "up", head_start: float = 0.0
) -> float:
    """The h whose run length, while the spread is the baseline's, is ``wanted``, to 1e-6 of it.

    ValueError where even h = 0 runs longer, or none that can be computed runs so long.
    """

    def excess(h: float) -> float:
        length = run_length(k, h, nu=nu, side=side, head_start=head_start)
        return math.log(length / wanted)

    rate, overshoot = decay(k, nu, side), 1.2 * math.sqrt(2 / nu)
    guess = math.log1p(wanted * rate * abs(k - 1)) / rate - overshoot
    guess = min(max(guess, overshoot / 6), _highest(nu))
    return increasing_root(excess, guess, rate, 1e-6, _highest(nu))


def _refuse(h: float, nu: int) -> None:
    if h > _highest(nu):
        raise ValueError(
            f"h {h:g} is beyond {_highest(nu):.3g}, as far as run lengths are computed"
        )


def _highest(nu: int) -> float:
    """Beyond it too many cells would be needed to be precise."""
    return 150 * math.sqrt(2 / nu)


def _cells(k: float, h: float, nu: int, side: Way) -> int:
    """Even; a sixth of a mean square's standard error wide or less."""
    width = math.sqrt(2 / nu) / 6
    if side == "down":
        # A lower sum grows by k at most, so that the run length bends at h less multiples of k.
        width = min(width, k / (24 if nu == 1 else 12))
    return min(_MOST_CELLS, max(_FEWEST_CELLS, 2 * math.ceil(h / width / 2)))


class _Chain(NamedTuple):
    """Probabilities of moving between sums that lie evenly from 0 to h, and of signalling."""

    moves: Array
    absorbed: Array

    def lengths(self, head_start: float) -> tuple[float, float]:
        """Run lengths from 0 and from the head start; the chain is used up."""
        start = _start(head_start, self.absorbed.size)
        steps = steps_to_absorption(self.moves, self.absorbed)
        if steps[0] == math.inf:
            return math.inf, math.inf
        return float(steps[0]), float(start @ steps)


def _start(head_start: float, sums: int) -> Array:
    """The probability to begin at each of the sums: the head start lies between two."""
    start = np.zeros(sums)
    at = head_start * (sums - 1)
    left = min(int(at), sums - 2)
    start[left], start[left + 1] = 1 - (at - left), at - left
    return start


def _chain(k: float, h: float, nu: int, side: Way, cells: int) -> _Chain:
    """By linear interpolation between ``cells`` + 1 sums: a Markov chain as D. Brook & D. A. Evans
    1972, in which the expectation of every interpolated piece is exact, so that neither the
    density's pole at 0 (ν = 1) nor its jump (ν = 2) costs precision, and every probability is
    positive."""
    step = h / cells
    offsets = step * np.arange(-cells - 1.0, cells + 2.0)
    values = k + offsets if side == "up" else k - offsets
    above, below = _means(values, nu)
    # Of a piece around a value: the second difference of either partial mean, whichever keeps its
    # digits there; of the end pieces the first difference.
    pieces = np.where(values[1:-1] > 1, np.diff(above, 2), np.diff(below, 2)) / step
    at = np.arange(cells + 1)
    moves = np.maximum(pieces[at[None, :] - at[:, None] + cells], 0.0)
    lowest, highest = cells + 1 - at, 2 * cells + 1 - at  # where 0 and h lie, seen from each sum
    tail, body = _tails(values, nu)
    if side == "up":
        moves[:, 0] = np.diff(below)[lowest] / step
        absorbed = tail[highest]
        end = np.where(
            values[highest] > 1,
            -np.diff(above)[highest - 1] / step - tail[highest],
            body[highest] - np.diff(below)[highest - 1] / step,
        )
    else:
        moves[:, 0] = np.diff(above)[lowest] / step
        absorbed = body[highest]
        end = np.where(
            values[highest] > 1,
            tail[highest] - np.diff(above)[highest - 1] / step,
            -np.diff(below)[highest - 1] / step - body[highest],
        )
    moves[:, -1] = np.maximum(end, 0.0)
    return _Chain(moves, absorbed)


def _means(values: Array, nu: int) -> tuple[Array, Array]:
    """E max(X − x, 0) and E max(x − X, 0) of a mean square X at each of ``values``, each to its
    own relative precision where it is used."""
    positive = np.maximum(values, 0.0)
    above = np.where(values > 0, chi_square.mean_above(positive, nu), 1 - values)
    low = np.minimum(positive, 2.0)
    below = np.where(values > 2, above + values - 1, chi_square.mean_below(low, nu))
    return above, below


def _tails(values: Array, nu: int) -> tuple[Array, Array]:
    """P(X > x) and P(X ≤ x) at each of ``values``."""
    positive = np.maximum(values, 0.0)
    tail = chi_square.sf_array(nu * positive, nu)
    body = np.where(values > 1, 1 - tail, chi_square.cdf_array(nu * np.minimum(positive, 1.0), nu))
    return tail, body


def decay(k: float, nu: int, side: Way) -> float:
    """The θ > 0 at which E exp(θ·increment) = 1 (H. Cramér; W. Feller, An Introduction to
    Probability Theory II, XII.5, from memory): by so much h adds to ln(run length), far out. A
    rough small number for a ``k`` on the wrong side of 1."""
    sign = 1 if side == "up" else -1
    if sign * (k - 1) <= 0:
        return 0.05

    def log_mean(theta: float) -> float:
        inside = 1 - 2 * sign * theta / nu
        return math.inf if inside <= 0 else -nu / 2 * math.log(inside) - sign * theta * k

    low, high = 0.0, nu / 2 if sign > 0 else 1.0
    while log_mean(high) < 0:
        high *= 2
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if log_mean(middle) < 0 else (low, middle)
    return high
