"""An EWMA as a Markov chain, in units of its own standard error: of normal values, or clipped ones.

Knows weighted averages of normal values. Must not know what is asked of them.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from monitor.methods.normal import Array, density, sf, sf_array
from monitor.methods.quadrature import gauss_legendre
from monitor.methods.runlength.chains import Side, steps_to_absorption

_FLOOR = 6.0
"""A one-sided average is followed so many standard errors below its mean, and stopped there."""

_SETTLED = 5e-5
"""Exact limits count as settled once their variance falls short by this share."""

_ALIKE = 16
"""The moves of step i do for the i/16 steps around it: the variance grows ever more slowly."""

_CELLS = 6
"""In what one value adds: their error falls with the square of their number."""


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
        return steps_to_absorption(moves, self.absorbed(y))

    def absorbed(self, y: Array) -> Array:
        """Probabilities of a signal from each of ``y``, with settled limits."""
        absorbed = sf_array((self.high - self.keep * y) / self.add - self.shift)
        if not self.walled:
            absorbed += sf_array((self.keep * y - self.low) / self.add + self.shift)
        return absorbed


@dataclass(frozen=True, slots=True)
class ClippedAverage(Average):
    """Of values limited to ± ``clip``: by linear interpolation between even nodes, of which every
    piece's expectation is exact, the atoms at ± clip included."""

    clip: float

    @classmethod
    def limited(
        cls, lam: float, width: float, shift: float, direction: Side, clip: float, coarser: int = 1
    ) -> ClippedAverage:
        """With cells ``coarser`` times as wide as they should be."""
        of = Average.of(lam, width, shift, direction)
        cells = max(24, math.ceil(_CELLS * (of.high - of.low) / of.add)) // coarser
        nodes = np.linspace(of.low, of.high, cells + 1)
        rest = of.keep, of.add, of.shift, of.walled
        return cls(nodes, np.ones(cells + 1), of.low, of.high, *rest, clip)

    def moves(self, y: Array, keep: float, add: float) -> Array:
        """Probabilities of moving from each of ``y`` to each node, shape (y, nodes)."""
        step = (self.high - self.low) / (self.nodes.size - 1)
        at = (self.nodes - keep * y[:, None]) / add
        above, below = add * self._mean_above(at), add * self._mean_below(at)
        upper = at[:, 1:-1] > self.shift
        moves = np.empty(at.shape)
        moves[:, 1:-1] = np.where(upper, np.diff(above, 2), np.diff(below, 2)) / step
        moves[:, 0] = (below[:, 1] - below[:, 0]) / step
        moves[:, -1] = (above[:, -2] - above[:, -1]) / step - self._beyond(at[:, -1], self.shift)
        if not self.walled:
            moves[:, 0] -= self._beyond(-at[:, 0], -self.shift)
        return np.maximum(moves, 0.0)

    def absorbed(self, y: Array) -> Array:
        """Probabilities of a signal from each of ``y``, with settled limits."""
        absorbed = self._beyond((self.high - self.keep * y) / self.add, self.shift)
        if not self.walled:
            absorbed += self._beyond((self.keep * y - self.low) / self.add, -self.shift)
        return absorbed

    def _beyond(self, x: Array, shift: float) -> Array:
        """P(a value > x); towards the other side with both signs turned."""
        tail = sf_array(np.clip(x, -self.clip, self.clip) - shift)
        return np.where(x < -self.clip, 1.0, np.where(x >= self.clip, 0.0, tail))

    def _mean_above(self, x: Array) -> Array:
        """E max(value − x, 0)."""
        return _limited_above(x, self.shift, self.clip)

    def _mean_below(self, x: Array) -> Array:
        """E max(x − value, 0)."""
        return _limited_above(-x, -self.shift, self.clip)


def _limited_above(x: Array, shift: float, clip: float) -> Array:
    """E max(X − x, 0) of a normal X about ``shift`` limited to ± ``clip``: ∫ P(X > t) dt from x."""
    inside = np.clip(x, -clip, clip) - shift
    rest = float(density(np.array(clip - shift))) - (clip - shift) * sf(clip - shift)
    tail = density(inside) - inside * sf_array(inside) - rest
    return np.maximum(tail, 0.0) + np.maximum(-clip - x, 0.0)
