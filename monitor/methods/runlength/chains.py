"""Absorbing Markov chains: expected steps to absorption, exact to intervals of 1e15 and far beyond.

Knows transition probabilities. Must not know what a state stands for.
"""

from __future__ import annotations

import math
from typing import Literal

import numpy as np

from monitor.methods.normal import Array

Side = Literal["both", "up", "down"]
"""Which signals count."""


def either(one: tuple[float, float], other: tuple[float, float]) -> float:
    """Average run length of two sums that are never both high, from that of each by itself: from 0,
    and from where it starts (J. M. Lucas & R. B. Crosier 1982, Technometrics 24).

    From head starts far above a half both are high at first, and the answer is too low.
    """
    (fast, fast_start), (slow, slow_start) = sorted((one, other))
    if slow == math.inf:
        return fast_start
    return max(1.0, (fast_start + fast * (slow_start / slow - 1)) / (1 + fast / slow))


_NEVER = 1e-60
"""Moves rarer than this change no run length worth telling, and are left out."""

_BLOCK = 24
"""States eliminated together: numpy's cost a call is then shared by so many."""

_DIGITS_KEPT = 1e-10
"""A block whose exits add up to 1 less precisely than this is eliminated state by state."""


def steps_to_absorption(moves: Array, absorbed: Array) -> Array:
    """Expected number of steps until absorption from each state, shape (n,).

    ``moves`` (n, n) holds the probabilities of moving between transient states, ``absorbed`` (n,)
    those of absorption; both are overwritten. The diagonal is not read: a state is left with the
    sum of its other probabilities. Elimination without subtraction (W. K. Grassmann, M. I. Taksar &
    D. P. Heyman 1985, Operations Research 33) keeps the relative precision of the probabilities
    however rare absorption is, where solving (I − P)L = 1 loses all digits at 1e15. All inf where
    the first state's number exceeds a float: every state must be able to reach that one.
    """
    n = absorbed.size
    np.fill_diagonal(moves, 0.0)
    spent = np.ones(n)
    # Where states lie in the order of a quantity that moves by small steps, most moves are none:
    # only those from the first that is one are touched, along rows and along columns.
    likely = moves > _NEVER
    np.fill_diagonal(likely, True)
    row_from, column_from = likely.argmax(axis=1), likely.argmax(axis=0)
    passes: list[tuple[int, int, int, Array]] = []
    waiting = [(max(1, end - _BLOCK), end) for end in range(1 + (n - 1) % _BLOCK, n + 1, _BLOCK)]
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        while waiting:
            low, high = waiting.pop()
            if low == high:
                continue
            left, top = row_from[low:high].min(), column_from[low:high].min()
            onward = moves[low:high, left:low]
            visits = _visits(moves[low:high, low:high], onward.sum(axis=1) + absorbed[low:high])
            if visits is None:
                waiting += [(i, i + 1) for i in range(low, high)]
                continue
            passes.append((left, low, high, visits))
            if top == low:
                continue
            into = moves[top:low, low:high] @ visits
            moves[top:low, left:low] += into @ onward
            absorbed[top:low] += into @ absorbed[low:high]
            spent[top:low] += into @ spent[low:high]
            np.minimum(row_from[top:low], left, out=row_from[top:low])
            np.minimum(column_from[left:low], top, out=column_from[left:low])
            np.fill_diagonal(moves[top:low, top:low], 0.0)
        longest = spent[0] / absorbed[0]
    if not np.isfinite(longest):
        return np.full(n, np.inf)
    steps = np.empty(n)
    steps[0] = longest
    for left, low, high, visits in reversed(passes):
        steps[low:high] = visits @ (spent[low:high] + moves[low:high, left:low] @ steps[left:low])
    return steps


def _visits(within: Array, exits: Array) -> Array | None:
    """Expected visits to each state of a block, from each, before it is left: shape (b, b).

    ``within`` (b, b) holds the moves inside, ``exits`` (b,) those out of it. None where the block
    is left so rarely that the inverse loses digits.
    """
    if exits.size == 1:
        return 1 / exits[:, None]
    away = np.diag(within.sum(axis=1) + exits) - within
    try:
        visits = np.linalg.inv(away)
    except np.linalg.LinAlgError:
        return None
    kept = np.abs(visits @ exits - 1).max() < _DIGITS_KEPT and visits.min() >= 0
    return np.asarray(visits) if kept else None
