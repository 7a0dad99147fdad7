"""Run lengths of the tabular CUSUM, and the decision interval that gives a wanted one.

Knows sums of normal values. Must not know sigma, streams or alerts.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from monitor.methods.normal import Array, density, sf, sf_array, sf_within
from monitor.methods.quadrature import gauss_legendre
from monitor.methods.runlength.chains import Side, either, steps_to_absorption
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import Wait, chain

_HIGHEST = 300.0

BOTH_HIGH = 0.5
"""Of a head start: above, the two sums may both be high at first."""

_MUCH = 1e8
"""Steps that two sums are followed together, times the most moves in each; half a second or so to
compute."""

_SELDOM = 0.75
"""Run length from the start over that from 0, from which on two sums hardly ever both come high."""

_NEGLIGIBLE = 1e-9

_ABOVE = 1 + 1e-8


def run_length(
    k: float,
    h: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    head_start: float = 0.0,
    clip: float | None = None,
) -> float:
    """Average run length of a CUSUM with reference ``k`` and decision interval ``h``.

    ``head_start`` is a fraction of h, below 1; ``clip`` limits each value (ValueError unless it is
    above k: the sums could not rise). ValueError for an h above 300. Both sides together follow
    J. M. Lucas & R. B. Crosier 1982, exact because the two sums cannot both be high; while they are
    from a head start above a half, they are followed together. Where that takes too long, and with
    ``clip``, the answer may be 5 % too low then, and there is none (ValueError) where a sum that
    starts so high mostly signals at once. Relative error below 1e-6 otherwise, with ``clip`` 1e-3.
    Check: k 0.5, h 5: 465.4 at shift 0, 10.38 at 1.
    """
    if clip is not None and clip <= k:
        raise ValueError(f"clip {clip} leaves nothing above k {k}: the sums would never rise")
    if h > _HIGHEST:
        raise ValueError(f"h {h:g} is beyond {_HIGHEST:g}, as far as run lengths are computed")
    if direction != "both":
        return _one_side(k, h, shift if direction == "up" else -shift, head_start, clip)[1]
    up = _one_side(k, h, shift, head_start, clip)
    down = up if shift == 0 else _one_side(k, h, -shift, head_start, clip)
    if head_start <= BOTH_HIGH:
        return either(up, down)
    # They fall by k a step, and wander as far as h in about h² steps.
    steps = min(h * h, head_start * h / max(k, 1e-9))
    if clip is None and steps * _nodes(h) ** 2 < _MUCH:
        return _both_high(k, h, shift, head_start * h, up[0], down[0])
    if min(start / zero for zero, start in (up, down)) < _SELDOM:
        raise ValueError(
            f"two sums from a head start of {head_start:g}: only up to {BOTH_HIGH:g} their run "
            "length can be computed with a clip or so small a k"
        )
    return either(up, down)


def _nodes(h: float) -> int:
    return 16 + math.ceil(1.6 * h)


def _both_high(k: float, h: float, shift: float, start: float, up: float, down: float) -> float:
    """Run length of two sums that both begin at ``start``; ``up`` and ``down`` are those of each by
    itself, from 0.

    Until one of them is 0 they fall together by 2k a step, so that one tells the other; from then
    on they are never both high.
    """
    if math.inf in (up, down):
        return math.inf
    inverse = 1 / up + 1 / down
    together, total = 2 * start, 1.0
    values, chances = np.array([start]), np.ones(1)

    def arriving(at: Array, weights: Array) -> Array:
        """The probability that the upper sum comes to each of ``at``."""
        moves = density(at[None, :] - values[:, None] - (shift - k))
        return np.asarray(chances @ moves) * weights

    def between(low: float, high: float) -> tuple[Array, Array]:
        # Few different numbers of them: they take long to find.
        nodes, quadrature = gauss_legendre(16 * math.ceil(1 + 0.1 * (high - low)))
        half = (high - low) / 2
        return low + half * (nodes + 1), half * quadrature

    from_up, from_down = _from(k, h, shift), _from(k, h, -shift)
    while True:
        together -= 2 * k
        least = max(together, 0.0)
        if least < h:
            at, weights = between(least, h)
            # The other sum at 0: L(u, 0) = L(u)·L'(0) / (L(0) + L'(0)).
            total += float(arriving(at, weights) @ from_up(at)) / (up * inverse)
            total += float(arriving(together - at, weights) @ from_down(at)) / (down * inverse)
        if together <= 0:
            at, weights = between(together, 0.0)
            return total + float(arriving(at, weights).sum()) / inverse
        at, weights = between(max(0.0, together - h), min(h, together))
        values, chances = at, arriving(at, weights)
        both = float(chances.sum())
        total += both
        if both / inverse < _NEGLIGIBLE * total:
            return total


def _from(k: float, h: float, shift: float) -> Callable[[Array], Array]:
    """Run lengths of the upper sum from any others, by its integral equation."""
    moves, absorbed = _moves(k, h, shift, 0.0)
    sums = np.concatenate(([0.0], h / 2 * (gauss_legendre(absorbed.size - 2)[0] + 1)))
    weights = np.concatenate(([0.0], h / 2 * gauss_legendre(absorbed.size - 2)[1]))
    lengths = steps_to_absorption(moves, absorbed)[:-1]

    def found(at: Array) -> Array:
        onward = density(sums[None, :] - at[:, None] - (shift - k)) * weights
        return np.asarray(1 + sf_array(at + shift - k) * lengths[0] + onward @ lengths)

    return found


def wait(
    k: float, h: float, shift: float, head_start: float = 0.0, clip: float | None = None
) -> Wait:
    """Of the upper sum, the chance to have given no signal yet, point after point."""
    if h > _HIGHEST:
        raise ValueError(f"h {h:g} is beyond {_HIGHEST:g}, as far as run lengths are computed")
    if clip is None:
        moves, _ = _moves(k, h, shift, head_start * h)
        at = len(moves) - 1
    else:
        moves, _, at = _clipped(k, h, shift, head_start * h, clip, _cells(h))
    start = np.zeros(len(moves))
    start[at] = 1.0
    return chain(start, moves)


def decision_interval(
    k: float,
    wanted: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    head_start: float = 0.0,
    clip: float | None = None,
) -> float:
    """The h whose run length at ``shift`` is ``wanted``, to 1e-7 of it (1e-5 with ``clip``; where
    the run length jumps past ``wanted``, as it then may, the h from which on it is longer).

    ValueError where even h = 0 runs longer, or none up to 300 so long: a shift above k is signalled
    soon. Check, at shift 0: k 0.5 and 1e6 give 12.657.
    """

    def excess(h: float) -> float:
        length = run_length(k, h, shift, direction=direction, head_start=head_start, clip=clip)
        return math.log(length / wanted)

    drift = (abs(shift) if direction == "both" else shift if direction == "up" else -shift) - k
    sides = 2 if direction == "both" and shift == 0 else 1
    guess = min(_siegmund_interval(drift, wanted * sides), _HIGHEST)
    slope = -2 * drift if drift < -0.05 else 1 / guess
    if clip is None:
        return increasing_root(excess, guess, slope, 1e-7, _HIGHEST)
    # A jump is where clipped values alone add up to h; rounding must not put h below their sum.
    return _ABOVE * increasing_root(excess, guess, slope, 1e-5, _HIGHEST, jumps=True)


def _siegmund_interval(drift: float, wanted: float) -> float:
    """A first guess at h: D. Siegmund 1985, Sequential Analysis, with the overshoot of 1.166."""
    if drift < -1e-3:
        reach = math.log1p(2 * drift * drift * wanted) / (-2 * drift)
    elif drift > 1e-3:
        reach = drift * wanted
    else:
        reach = math.sqrt(wanted)
    return max(0.2, reach - 1.166)


def _one_side(
    k: float, h: float, shift: float, head_start: float, clip: float | None
) -> tuple[float, float]:
    """Run lengths of the upper sum, started at 0 and at its head start."""
    start = head_start * h
    if clip is None:
        return _smooth(k, h, shift, start)
    # The cells' error falls with the square of their number: extrapolate from two (Richardson).
    fine = _cells(h)
    rough, close = (
        _clipped_lengths(*_clipped(k, h, shift, start, clip, each)) for each in (fine // 2, fine)
    )
    zero, started = (c * (c / r) ** (1 / 3) for r, c in zip(rough, close, strict=True))
    return zero, started


def _cells(h: float) -> int:
    return max(80, math.ceil(6 * h))


def _clipped_lengths(moves: Array, absorbed: Array, at: int) -> tuple[float, float]:
    steps = steps_to_absorption(moves, absorbed)
    return float(steps[0]), float(steps[at])


def _smooth(k: float, h: float, shift: float, start: float) -> tuple[float, float]:
    steps = steps_to_absorption(*_moves(k, h, shift, start))
    return float(steps[0]), float(steps[-1])


def _moves(k: float, h: float, shift: float, start: float) -> tuple[Array, Array]:
    """E. S. Page's integral equation by Gauss–Legendre quadrature, an atom at 0 before the nodes,
    the start behind them (J. M. Lucas & R. B. Crosier 1982, appendix): probabilities of moving, and
    of signalling."""
    nodes, weights = gauss_legendre(_nodes(h))
    n = nodes.size + 2
    sums = np.empty(n)
    sums[0], sums[1:-1], sums[-1] = 0.0, h / 2 * (nodes + 1), start
    moves = np.empty((n, n))
    drift = shift - k
    moves[:, 0] = sf_array(sums + drift)
    moves[:, 1:-1] = density(sums[None, 1:-1] - sums[:, None] - drift) * (h / 2 * weights)
    moves[:, -1] = 0.0
    return moves, sf_array(h - sums - drift)


def _clipped(
    k: float, h: float, shift: float, start: float, clip: float, cells: int
) -> tuple[Array, Array, int]:
    """A Markov chain on cells (D. Brook & D. A. Evans 1972) for values limited to ± ``clip``:
    probabilities of moving and of signalling, and which state is the start (the first is 0).

    The values have atoms at ± clip, which make the run length jump at h less multiples of clip − k:
    cell borders lie there. A sum that rises by the clip alone has a state of its own, since it may
    come to h exactly, which is no signal. An atom between two cells' centres is shared by both.
    """
    rise, fall = clip - k, clip + k
    width = rise / max(1, round(cells * rise / h))
    borders = h - width * np.arange(math.ceil(h / width - 1e-9), -1, -1)
    borders[0] = 0.0
    centres = (borders[1:] + borders[:-1]) / 2
    ladders = _ladder(0.0, rise, h), _ladder(start, rise, h)
    # In the order of sums all moves are short ones, which elimination makes use of.
    sums = np.concatenate((ladders[0], centres, ladders[1]))
    order = np.argsort(sums, kind="stable")
    places = np.argsort(order)
    cell = places[ladders[0].size : -ladders[1].size]
    sums, states = sums[order], np.arange(sums.size)

    # Of the borders only those near enough for a value that is not clipped.
    near = min(borders.size, math.ceil(2 * clip / width) + 2)
    first = np.searchsorted(borders, sums - fall, side="right") - 1
    first = np.clip(first, 0, borders.size - near)
    borders_near = first[:, None] + np.arange(near)
    values = borders[borders_near] - sums[:, None] + k
    above = sf_within(values - shift, -clip - shift, clip - shift)
    top, bottom = sf(clip - shift), sf(clip + shift)
    moves = np.zeros((sums.size, sums.size))
    moves[states[:, None], cell[borders_near[:, :-1]]] = above[:, :-1] - above[:, 1:]
    moves[:, 0] += np.where(first == 0, sf(-clip - shift) - above[:, 0], 0.0)
    absorbed = np.where(first + near == borders.size, above[:, -1] - top, 0.0)

    for rung in (places[: ladders[0].size], places[-ladders[1].size :]):
        moves[rung[:-1], rung[1:]] += top
        absorbed[rung[-1]] += top
    grid, landing = np.concatenate(([0.0], centres)), np.concatenate(([0], cell))
    for origin, reached, chance in ((cell, centres + rise, top), (states, sums - fall, bottom)):
        absorbed[origin[reached >= h]] += chance
        inside = reached < h
        target = np.clip(reached[inside], 0.0, grid[-1])
        right = np.clip(np.searchsorted(grid, target), 1, grid.size - 1)
        part = (target - grid[right - 1]) / (grid[right] - grid[right - 1])
        moves[origin[inside], landing[right]] += chance * part
        moves[origin[inside], landing[right - 1]] += chance * (1 - part)
    return moves, absorbed, int(places[-ladders[1].size])


def _ladder(foot: float, rise: float, h: float) -> Array:
    """The sums that clipped values alone reach from ``foot``, up to h itself."""
    return foot + rise * np.arange(1.0 + math.floor((h - foot) / rise + 1e-9))
