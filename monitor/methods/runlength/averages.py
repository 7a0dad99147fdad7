"""An EWMA as a Markov chain, in units of its own standard error: of normal values, or clipped ones.

Knows weighted averages of normal values. Must not know what is asked of them.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Self

import numpy as np

from monitor.methods.normal import Array, density, sf_array
from monitor.methods.quadrature import gauss_legendre
from monitor.methods.runlength.chains import Side, steps_to_absorption

_FLOOR = 6.0
"""A one-sided average is followed so many standard errors below its mean, and stopped there."""

_FAR = 12.0
"""Nor is one that is watched on both sides followed farther, where its mean is off to one side so
that it would hardly ever cross the limit on the other: e to the −2cw times as often, the mean being
off by c standard errors of the average and the limit at w."""

_SETTLED = 2e-3
"""Exact limits count as settled once their variance falls short by this share."""

_ALIKE = 5
"""Of steps up to the i-th the last i/5 are taken alike: the variance grows ever more slowly."""

_AHEAD = 0.75
"""Where more nodes are needed, there are enough for values that add so much of what they do now."""

_NEVER = -650.0
"""Of a logarithm: the processor is slow with numbers smaller than about e to the -700."""

_CELLS = 6
"""In what one value adds: their error falls with the square of their number."""

_FEWEST_CELLS = 100
"""Where one value adds much, what lies at the clip is told badly by fewer."""


@dataclass(frozen=True, slots=True)
class Average:
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
    def of(cls, lam: float, width: float, shift: float, direction: Side) -> Average:
        add = math.sqrt(lam * (2 - lam))
        low, walled = -width, direction != "both"
        if walled:
            low = min(0.0, shift * add / lam) - _FLOOR
        elif width > _FAR and abs(shift) * add / lam > 1:
            low, walled, shift = -_FAR, True, abs(shift)
        nodes, weights = _between(low, width, add)
        return cls(nodes, weights, low, width, 1 - lam, add, shift, walled)

    def _resolving(self, add: float) -> Self:
        """With as many nodes as values need that ``add`` so much."""
        nodes, weights = _between(self.low, self.high, add)
        return replace(self, nodes=nodes, weights=weights)

    def moves(self, y: Array, keep: float, add: float) -> Array:
        """Probabilities of moving from each of ``y`` to each node, shape (y, nodes)."""
        moves = self._relative(y, keep, add)
        # The quadrature errs by some 1e-5, which thousands of steps would add up.
        moves *= ((1 - self.absorbed(y, keep, add)) / moves.sum(axis=1))[:, None]
        return moves

    def _relative(self, y: Array, keep: float, add: float) -> Array:
        # φ in place and in as few passes as can be: most of the time goes here.
        half = math.sqrt(0.5)
        moves = self.nodes * (half / add) - ((keep * y / add + self.shift) * half)[:, None]
        np.multiply(moves, moves, out=moves)
        np.negative(moves, out=moves)
        np.maximum(moves, _NEVER, out=moves)
        np.exp(moves, out=moves)
        moves *= self.weights / (add * math.sqrt(2 * math.pi))
        if self.walled:
            moves[:, 0] += sf_array((keep * y - self.low) / add + self.shift)
        return moves

    def settling(self, lam: float) -> Iterator[tuple[Array, int]]:
        """Moves while exact limits settle: from those of the first point, which have one row, the
        start, to those that end at :attr:`nodes`; and how many steps each do for.

        In units of a standard error that is small at first a single value adds much, and few nodes
        are enough. Steps that differ little are taken alike, so that they take the average's own
        mean and variance just as far together.
        """
        decay = math.log1p(-lam) if lam < 1 else -math.inf
        ends = [max(1, math.ceil(math.log(_SETTLED) / (2 * decay)))]
        while ends[-1] > 1:
            ends.append(ends[-1] - 1 - ends[-1] // _ALIKE)
        grid = self if len(ends) == 1 else self._resolving(1.0)
        yield replace(grid, shift=self.shift).moves(np.zeros(1), 0.0, 1.0), 1
        for first, last in pairwise(reversed(ends)):
            steps, origin = last - first, grid.nodes
            first_variance, last_variance = (-math.expm1(2 * i * decay) for i in (first, last))
            kept = math.exp(steps * decay) * math.sqrt(first_variance / last_variance)
            keep = kept ** (1 / steps)
            add = math.sqrt(1 - keep * keep)
            # What a shift of 1 has done to the mean, before and after.
            first_mean, last_mean = (
                -math.expm1(i * decay) / math.sqrt(variance) * self.add / lam
                for i, variance in ((first, first_variance), (last, last_variance))
            )
            share = (last_mean - kept * first_mean) * (1 - keep) / (add * (1 - kept))
            if last == ends[0]:
                grid = self
            elif self._resolving(add).nodes.size > grid.nodes.size:
                grid = self._resolving(max(self.add, _AHEAD * add))
            grid = replace(grid, shift=self.shift * share)
            if grid.nodes.size != origin.size:
                yield grid.moves(origin, keep, add), 1
                steps -= 1
            if steps:
                yield grid.moves(grid.nodes, keep, add), steps

    def settled(self) -> Array:
        """Run lengths with settled limits, from each node and, last, from 0."""
        y = np.append(self.nodes, 0.0)
        moves = np.zeros((y.size, y.size))
        moves[:, :-1] = self._relative(y, self.keep, self.add)
        return steps_to_absorption(moves, self.absorbed(y, self.keep, self.add))

    def absorbed(self, y: Array, keep: float, add: float) -> Array:
        """Probabilities of a signal from each of ``y``, shape (y,)."""
        absorbed = sf_array((self.high - keep * y) / add - self.shift)
        if not self.walled:
            absorbed += sf_array((keep * y - self.low) / add + self.shift)
        return absorbed


@dataclass(frozen=True, slots=True)
class ClippedAverage(Average):
    """Of values limited to ± ``clip``: by linear interpolation between even nodes, of which every
    piece's expectation is exact, the atoms at ± clip included."""

    clip: float
    coarser: int

    @classmethod
    def limited(
        cls, lam: float, width: float, shift: float, direction: Side, clip: float, coarser: int = 1
    ) -> ClippedAverage:
        """With cells ``coarser`` times as wide as they should be."""
        of = Average.of(lam, width, shift, direction)
        nodes = _evenly(of.low, of.high, of.add, clip, coarser)
        rest = of.keep, of.add, of.shift, of.walled
        return cls(nodes, np.ones(nodes.size), of.low, of.high, *rest, clip, coarser)

    def _resolving(self, add: float) -> Self:
        """With as many nodes as values need that ``add`` so much."""
        nodes = _evenly(self.low, self.high, add, self.clip, self.coarser)
        return replace(self, nodes=nodes, weights=np.ones(nodes.size))

    def moves(self, y: Array, keep: float, add: float) -> Array:
        """Probabilities of moving from each of ``y`` to each node, shape (y, nodes): exact ones."""
        return self._relative(y, keep, add)

    def _relative(self, y: Array, keep: float, add: float) -> Array:
        step = (self.high - self.low) / (self.nodes.size - 1)
        at = (self.nodes - keep * y[:, None]) / add
        above, below = _mean_distances(at, self.shift, self.clip)
        moves = np.empty(at.shape)
        moves[:, 1:-1] = np.where(at[:, 1:-1] > self.shift, _bends(above), _bends(below))
        moves[:, 0] = below[:, 1] - below[:, 0]
        moves[:, -1] = above[:, -2] - above[:, -1]
        moves *= add / step
        moves[:, -1] -= self._beyond(at[:, -1], self.shift)
        if not self.walled:
            moves[:, 0] -= self._beyond(-at[:, 0], -self.shift)
        return np.maximum(moves, 0.0, out=moves)

    def absorbed(self, y: Array, keep: float, add: float) -> Array:
        """Probabilities of a signal from each of ``y``, shape (y,)."""
        absorbed = self._beyond((self.high - keep * y) / add, self.shift)
        if not self.walled:
            absorbed += self._beyond((keep * y - self.low) / add, -self.shift)
        return absorbed

    def _beyond(self, x: Array, shift: float) -> Array:
        """P(a value > x); towards the other side with both signs turned."""
        beyond = np.where(x < -self.clip, 1.0, 0.0)
        inside = (x >= -self.clip) & (x < self.clip)
        beyond[inside] = sf_array(x[inside] - shift)
        return beyond


def _mean_distances(x: Array, shift: float, clip: float) -> tuple[Array, Array]:
    """E max(X − x, 0) and E max(x − X, 0) of a normal X about ``shift`` limited to ± ``clip``.

    The smaller one has the precision of a tail; their difference is E X − x.
    """
    beyond, short = _mean_excess(np.array([clip - shift, clip + shift]))
    off = x - (shift - beyond + short)
    high = x > min(max(shift, -clip), clip)
    smaller, inside = np.zeros(x.shape), np.abs(x) <= clip
    tail = _mean_excess(np.abs(x[inside] - shift))
    smaller[inside] = np.maximum(tail - np.where(high[inside], beyond, short), 0.0)
    return np.where(high, smaller, smaller - off), np.where(high, smaller + off, smaller)


def _bends(values: Array) -> Array:
    """Second differences along rows."""
    return np.asarray(values[:, 2:] - 2 * values[:, 1:-1] + values[:, :-2])


def _mean_excess(x: Array) -> Array:
    """E max(Z − x, 0) of a standard normal Z."""
    return density(x) - x * sf_array(x)


def _between(low: float, high: float, add: float) -> tuple[Array, Array]:
    """Nodes and weights that resolve a normal density of standard deviation ``add``."""
    # Few different numbers of them: they take long to find.
    nodes, weights = gauss_legendre(16 * math.ceil(1 + 0.075 * (high - low) / add))
    half = (high - low) / 2
    return low + half * (nodes + 1), half * weights


def _evenly(low: float, high: float, add: float, clip: float, coarser: int) -> Array:
    """From where a value at the clip just comes to the limit, run lengths jump: half way between
    two nodes that costs least."""
    least = max(_FEWEST_CELLS, math.ceil(_CELLS * (high - low) / add)) // coarser
    keep = math.sqrt(max(0.0, 1 - add * add))
    jump = (high - add * clip) / keep if keep else high
    if not low < jump < high:
        return np.linspace(low, high, least + 1)
    cells = np.arange(least, least + least // 4)
    off = np.abs(cells * (jump - low) / (high - low) % 1 - 0.5)
    return np.linspace(low, high, int(cells[off.argmin()]) + 1)
