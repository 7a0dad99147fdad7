"""How long until a signal, not on average but with a given probability: quantiles of run lengths.

Knows chances to be still waiting, step after step. Must not know what is waited for.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from monitor.methods.normal import Array

Wait = Iterator[float]
"""The chance to be waiting still after the first step, the second …, without end."""

_SETTLING = 16
"""Steps between looks at whether the chance of a signal still changes."""

_ROUNDING = 1e-13
"""A chance below it cannot be told from none."""

_LONGEST = 20_000
"""Steps until the chance of a signal must have settled; some seconds to compute."""


def chain(states: Array, moves: Array) -> Wait:
    """The wait of a Markov chain that is absorbed: ``states`` (n,) holds the probabilities to begin
    in each transient state, ``moves`` (n, n) those of moving between them."""
    while True:
        states = states @ moves
        yield float(states.sum())


def either_until(waits: Sequence[Wait], probability: float) -> float:
    """The step by which one of independent ``waits`` is over with this ``probability`` in (0, 1).

    Once its start is forgotten the chance of a signal stays as it is, and what is left of the wait
    is geometric. ValueError where signals are too rare for that to be seen.
    """
    left, steps, remaining, before = 1 - probability, 0, 1.0, 0.0
    while True:
        after = math.prod(next(each) for each in waits)
        steps += 1
        if after <= left:
            return float(steps)
        chance = 1 - after / remaining
        if steps % _SETTLING == 0:
            # A sum that has far to go gives no sign of a signal at first.
            if chance > _ROUNDING and abs(chance - before) <= 1e-5 * chance + 1e-15:
                break
            if steps > _LONGEST:
                raise ValueError("signals are too rare to compute how long one takes")
            before = chance
        remaining = after
    return steps + math.ceil(math.log(left / after) / math.log1p(-chance))


def geometric_until(average: float, probability: float) -> float:
    """The step by which a signal that comes once in ``average`` steps, at random, has come."""
    if average == math.inf:
        return math.inf
    if average <= 1:
        return 1.0
    return float(max(1, math.ceil(math.log1p(-probability) / math.log1p(-1 / average))))
