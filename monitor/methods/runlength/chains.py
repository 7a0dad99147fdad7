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
    spent = np.ones(n)
    leaving = np.empty(n)
    # Where states lie in the order of a quantity that moves by small steps, most moves are none:
    # only those from the first that is one are touched, along rows and along columns.
    likely = moves > _NEVER
    np.fill_diagonal(likely, True)
    row_from, column_from = likely.argmax(axis=1), likely.argmax(axis=0)
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        for i in range(n - 1, 0, -1):
            left, top = row_from[i], column_from[i]
            row = moves[i, left:i]
            leaving[i] = row.sum() + absorbed[i]
            if top == i:
                continue
            into = moves[top:i, i] / leaving[i]
            moves[top:i, left:i] += into[:, None] * row
            absorbed[top:i] += into * absorbed[i]
            spent[top:i] += into * spent[i]
            np.minimum(row_from[top:i], left, out=row_from[top:i])
            np.minimum(column_from[left:i], top, out=column_from[left:i])
        longest = spent[0] / absorbed[0]
    if not np.isfinite(longest):
        return np.full(n, np.inf)
    steps = np.empty(n)
    steps[0] = longest
    for i in range(1, n):
        left = row_from[i]
        steps[i] = (spent[i] + moves[i, left:i] @ steps[left:i]) / leaving[i]
    return steps
