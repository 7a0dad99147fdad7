"""Run lengths of the EWMA, and the width and weight that give a wanted one.

Knows weighted averages of normal values. Must not know sigma, streams or alerts.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from monitor.methods.normal import Array, density, sf_array, upper_quantile
from monitor.methods.quadrature import gauss_legendre
from monitor.methods.runlength.chains import Side, steps_to_absorption
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import Wait, chain

_FLOOR = 6.0
"""A one-sided average is followed so many standard errors below its mean, and stopped there."""

_SETTLED = 5e-5
"""Exact limits count as settled once their variance falls short by this share."""

_ALIKE = 16
"""The moves of step i do for the i/16 steps around it: the variance grows ever more slowly."""


def run_length(
    lam: float,
    width: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    asymptotic: bool = False,
) -> float:
    """Average run length of an EWMA of weight ``lam`` with limits ``width`` of its standard errors.

    S. V. Crowder 1987's integral equation; with exact limits (J. M. Lucas & M. S. Saccucci 1990) it
    is stepped back from where they have settled. Relative error below 1e-4 with exact limits, else
    1e-6. Check: λ 0.1, width 2.814, asymptotic: 499.6 at shift 0, 10.33 at 1.
    """
    average = _Average.of(lam, width, -shift if direction == "down" else shift, direction)
    if asymptotic:
        return float(average.settled()[-1])
    onward = average.settled()[:-1]
    for moves, steps in reversed(list(average.settling(lam))):
        for _ in range(steps):
            onward = 1 + moves @ onward
    return 1 + float((average.moves(np.zeros(1), 0.0, 1.0) @ onward)[0])


def wait(
    lam: float,
    width: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    asymptotic: bool = False,
) -> Wait:
    """The chance to have given no signal yet, point after point; arguments as of
    :func:`run_length`."""
    average = _Average.of(lam, width, -shift if direction == "down" else shift, direction)
    settled = average.moves(average.nodes, average.keep, average.add)
    first = average.add if asymptotic else 1.0
    states = average.moves(np.zeros(1), 0.0, first)[0]
    yield float(states.sum())
    for moves, steps in () if asymptotic else average.settling(lam):
        for _ in range(steps):
            states = states @ moves
            yield float(states.sum())
    yield from chain(states, settled)


def width_for(
    lam: float,
    wanted: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    asymptotic: bool = False,
) -> float:
    """The width whose run length at ``shift`` is ``wanted``, to 1e-7 of it
    (1e-5 with exact limits). Check, asymptotic, at shift 0: λ 0.1 and 500 give 2.814.
    """

    settled = _settled_width(lam, wanted, shift, direction, 1e-7)
    if asymptotic:
        return settled

    def excess(width: float) -> float:
        return math.log(run_length(lam, width, shift, direction=direction) / wanted)

    # Exact limits change little, and cost more to evaluate.
    return increasing_root(excess, settled, settled, 1e-5)


def _settled_width(
    lam: float, wanted: float, shift: float, direction: Side, tolerance: float
) -> float:
    def excess(width: float) -> float:
        length = run_length(lam, width, shift, direction=direction, asymptotic=True)
        return math.log(length / wanted)

    # A first guess: points taken as independent or, for a small λ, as a continuous process that
    # crosses w at the rate λ·w·φ(w) (S. O. Rice 1944), about the mean that the average settles at.
    centre = (-shift if direction == "down" else shift) * math.sqrt((2 - lam) / lam)
    if direction == "both":
        centre = abs(centre)
    each_side = wanted * (2 if direction == "both" and shift == 0 else 1)
    reach = independent = upper_quantile(min(0.3, 1 / each_side))
    for _ in range(3):
        reach = math.sqrt(2 * math.log(max(1.1, 0.4 * lam * reach * each_side)))
    reach = min(reach, independent)
    return increasing_root(excess, max(0.1, centre + reach), reach, tolerance)


def best_weight(
    shift: float, wanted: float, ignored: float = 0.0, *, direction: Side = "both"
) -> float:
    """The λ that signals a ``shift`` > 0 soonest among those whose run length at the shift
    ``ignored`` is ``wanted``.

    To about 5 %, within which the delay hardly moves, and not below 0.003. Judged with settled
    limits: a shift meets an average that has long been running.
    """

    def delay(log_lam: float) -> float:
        lam = math.exp(log_lam)
        width = _settled_width(lam, wanted, ignored, direction, 1e-4)
        return run_length(lam, width, shift, direction=direction, asymptotic=True)

    step, lowest = 0.4, math.log(0.003)
    guess = 0.75 * shift * shift / math.log(wanted)
    at = min(max(math.log(guess), lowest), -step)
    delays = {at: delay(at)}
    while True:
        for neighbour in (max(at - step, lowest), min(at + step, 0.0)):
            if neighbour not in delays:
                delays[neighbour] = delay(neighbour)
        best = min(delays, key=delays.__getitem__)
        if best == at:
            break
        at = best
    left, right = max(at - step, lowest), min(at + step, 0.0)
    if at in (left, right):
        return math.exp(at)
    # The vertex of the parabola through the three.
    below, above = delays[left] - delays[at], delays[right] - delays[at]
    rise, run = at - left, right - at
    return math.exp(
        at + (below * run * run - above * rise * rise) / (2 * (below * run + above * rise))
    )


@dataclass(frozen=True, slots=True)
class _Average:
    """An EWMA in units of its own standard error, where its limits are constant:
    y ← keep·y + add·x."""

    nodes: Array
    weights: Array
    low: float
    high: float
    keep: float
    add: float
    shift: float
    walled: bool

    @classmethod
    def of(cls, lam: float, width: float, shift: float, direction: Side) -> _Average:
        add = math.sqrt(lam * (2 - lam))
        walled = direction != "both"
        low = min(0.0, shift * add / lam) - _FLOOR if walled else -width
        nodes, weights = gauss_legendre(16 + math.ceil(1.1 * (width - low) / add))
        half = (width - low) / 2
        return cls(
            low + half * (nodes + 1), half * weights, low, width, 1 - lam, add, shift, walled
        )

    def moves(self, y: Array, keep: float, add: float) -> Array:
        """Probabilities of moving from each of ``y`` to each node, shape (y, nodes)."""
        moves = density((self.nodes - keep * y[:, None]) / add - self.shift)
        moves *= self.weights / add
        if self.walled:
            moves[:, 0] += sf_array((keep * y - self.low) / add + self.shift)
        return moves

    def settling(self, lam: float) -> Iterator[tuple[Array, int]]:
        """Moves between nodes while exact limits settle, from the second point on, and how many
        steps they do for."""
        decay = math.log1p(-lam) if lam < 1 else -math.inf
        last = max(1, math.ceil(math.log(_SETTLED) / (2 * decay)))
        groups = []
        while last > 1:
            steps = 1 + last // _ALIKE
            groups.append((last - steps / 2, steps))
            last -= steps
        for middle, steps in reversed(groups):
            before = -math.expm1((2 * middle - 1) * decay)
            after = -math.expm1((2 * middle + 1) * decay)
            keep, add = self.keep * math.sqrt(before / after), self.add / math.sqrt(after)
            yield self.moves(self.nodes, keep, add), steps

    def settled(self) -> Array:
        """Run lengths with settled limits, from each node and, last, from 0."""
        y = np.append(self.nodes, 0.0)
        moves = np.zeros((y.size, y.size))
        moves[:, :-1] = self.moves(y, self.keep, self.add)
        absorbed = sf_array((self.high - self.keep * y) / self.add - self.shift)
        if not self.walled:
            absorbed += sf_array((self.keep * y - self.low) / self.add + self.shift)
        return steps_to_absorption(moves, absorbed)
