"""Run lengths of Shewhart charts with rules on patterns, exactly, as a Markov chain.

Knows rules that look at which side and zone each point fell in. Must not know charts or units, nor
rules that compare neighbouring points (trend, alternation): those are simulated.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from functools import lru_cache
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from monitor.methods.normal import Array, sf_array
from monitor.methods.runlength.chains import Side
from monitor.methods.runlength.waits import Wait


class Rule(Protocol):
    """A rule as the plan gives it: its name, and of the rest what that name needs."""

    @property
    def rule(self) -> str: ...
    @property
    def width(self) -> float: ...
    @property
    def count(self) -> int: ...
    @property
    def of(self) -> int: ...
    @property
    def length(self) -> int: ...


Key = tuple[str, float, int, int, int]
Memory = tuple[int, int]
"""What a rule must remember of the points before: one number for each side."""

Table = NDArray[np.intp]
"""States in rows, zones in columns: the state a point in that zone leads to, or SIGNAL."""

SIGNAL = -1
_KNOWN = frozenset({"outside", "zone", "run", "stratification", "mixture"})
_LONGEST = 9


def exact(rules: Sequence[Rule]) -> bool:
    """Whether the chain can hold ``rules``: no trend or alternation, and windows short enough that
    what must be remembered stays within some thousands of states."""
    remembered = sum(r.of - 1 for r in rules if r.rule == "zone")
    return remembered <= _LONGEST and all(r.rule in _KNOWN for r in rules)


def run_length(rules: Sequence[Rule], shift: float = 0.0, *, direction: Side = "both") -> float:
    """Average run length until the first of ``rules``, which must be :func:`exact`, signals.

    C. W. Champ & W. H. Woodall 1987. With ``direction`` the other side's signals do not count;
    stratification and mixture have no side. Check: the four zone rules of 1956: 91.75.
    """
    keys = _keys(rules)
    cuts, moves = _chain(keys, direction)
    probability = _zone_probabilities(cuts - shift)
    # From each state: the chance to be quiet for so many points, and to signal at the next one.
    # Once the start is forgotten their ratio, the chance to signal after quiet, stays as it is.
    quiet, then = np.ones(len(moves) + 1), np.zeros(len(moves) + 1)
    quiet[SIGNAL], then[:SIGNAL] = 0.0, (moves == SIGNAL) @ probability
    span = max(1, *(number for key in keys for number in key[3:]))
    total, points, before = 0.0, 0, math.nan
    while quiet[0] > 1e-15:
        chance = float(then[0] / quiet[0])
        if points % span == 0:
            if points > 3 * span and abs(chance - before) <= 1e-10 * chance:
                return total + float(quiet[0]) / chance if chance else math.inf
            before = chance
        total += float(quiet[0])
        points += 1
        quiet[:SIGNAL], then[:SIGNAL] = quiet[moves] @ probability, then[moves] @ probability
    return total


def wait(rules: Sequence[Rule], shift: float, direction: Side) -> Wait:
    """The chance to be quiet for so many points; what is given as for :func:`run_length`."""
    cuts, moves = _chain(_keys(rules), direction)
    probability = _zone_probabilities(cuts - shift)
    quiet = np.ones(len(moves) + 1)
    quiet[SIGNAL] = 0.0
    while True:
        quiet[:SIGNAL] = quiet[moves] @ probability
        yield float(quiet[0])


def _keys(rules: Sequence[Rule]) -> tuple[Key, ...]:
    return tuple((r.rule, r.width, r.count, r.of, r.length) for r in rules)


def _zone_probabilities(cuts: Array) -> Array:
    """Probability of each zone between the ``cuts``, lowest first, precise in both tails."""
    upper = np.concatenate((cuts, [math.inf]))
    lower = np.concatenate(([-math.inf], cuts))
    flip = lower + upper < 0
    near, far = np.where(flip, -upper, lower), np.where(flip, -lower, upper)
    return sf_array(near) - sf_array(far)


@lru_cache(maxsize=64)
def _chain(rules: tuple[Key, ...], direction: Side) -> tuple[Array, Table]:
    """Cuts between zones, and the moves; state 0 is the start."""
    widths = {width for name, width, *_ in rules if name != "run"}
    centre = {0.0} if any(name == "run" for name, *_ in rules) else set()
    cuts = np.array(sorted({-w for w in widths} | widths | centre))
    edges = np.concatenate(([cuts[0] - 1], cuts, [cuts[-1] + 1]))
    points = ((edges[1:] + edges[:-1]) / 2).tolist()
    steps = [_step(rule, direction) for rule in rules]
    start = ((0, 0),) * len(rules)
    index = {start: 0}
    queue, moves = [start], []
    for state in queue:
        row = []
        for point in points:
            after = [step(memory, point) for step, memory in zip(steps, state, strict=True)]
            following = tuple(memory for memory in after if memory is not None)
            if len(following) < len(after):
                row.append(SIGNAL)
                continue
            if following not in index:
                index[following] = len(queue)
                queue.append(following)
            row.append(index[following])
        moves.append(row)
    return cuts, np.array(moves)


def _step(rule: Key, direction: Side) -> Callable[[Memory, float], Memory | None]:
    """What the rule remembers after a point at z; None where it signals."""
    name, width, count, of, length = rule
    up, down = direction != "down", direction != "up"

    def outside(_: Memory, z: float) -> Memory | None:
        return None if (up and z > width) or (down and z < -width) else (0, 0)

    def zone(memory: Memory, z: float) -> Memory | None:
        above, below = memory
        rises, falls = up and z > width, down and z < -width
        if (rises and above.bit_count() + 1 >= count) or (falls and below.bit_count() + 1 >= count):
            return None
        kept = (1 << (of - 1)) - 1  # the points that the next window still holds
        return (above << 1 | rises) & kept, (below << 1 | falls) & kept

    def run(memory: Memory, z: float) -> Memory | None:
        above = memory[0] + 1 if up and z > 0 else 0
        below = memory[1] + 1 if down and z < 0 else 0
        return None if max(above, below) >= length else (above, below)

    def stratification(memory: Memory, z: float) -> Memory | None:
        inside = memory[0] + 1 if abs(z) < width else 0
        return None if inside >= length else (inside, 0)

    def mixture(memory: Memory, z: float) -> Memory | None:
        beyond = memory[0] + 1 if abs(z) > width else 0
        return None if beyond >= length else (beyond, 0)

    return {
        "outside": outside,
        "zone": zone,
        "run": run,
        "stratification": stratification,
        "mixture": mixture,
    }[name]
