"""Run lengths of the tabular CUSUM, and the decision interval that gives a wanted one.

Knows sums of normal values. Must not know sigma, streams or alerts.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np

from monitor.methods.normal import Array, density, sf, sf_array, sf_within
from monitor.methods.quadrature import gauss_legendre, upto
from monitor.methods.runlength.chains import Side, either, steps_to_absorption
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import Wait, chain

_HIGHEST = 300.0

BOTH_HIGH = 0.5
"""Of a head start: above, the two sums may both be high at first."""

_MUCH = 1e8
"""Steps that two sums are followed together, times the most moves in each; some twenty
milliseconds to compute."""

_STAGE_STEPS, _STAGE_WIDTH, _OUTER = 256, 4.0, 20
"""Two sums are followed with the same nodes for so many steps at most, until there is so much more
room on either side, which so many of them are for."""

_SELDOM = 0.65
"""Run length from the start over that from 0, from which on two sums hardly ever both come high."""

_NEGLIGIBLE = 1e-9

_JUMP, _CLOSE = 1e-8, 1e-3
"""Of h, where the run length of clipped values jumps; and near enough to try where it should."""


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
    ``clip``, the answer may be 10 % too low then, and there is none (ValueError) where a sum that
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
    start = head_start * h
    if start <= h / 2 + k:
        return either(up, down)
    if clip is None and _steps_together(k, h, start) * _nodes(h) ** 2 < _MUCH:
        return _both_high(k, h, shift, start, up[0], down[0])
    if min(begun / zero for zero, begun in (up, down)) < _SELDOM:
        raise ValueError(
            f"two sums from a head start of {head_start:g}: only up to {BOTH_HIGH:g} their run "
            "length can be computed with a clip or so small a k"
        )
    return either(up, down)


def _steps_together(k: float, h: float, start: float) -> float:
    """About how many steps it takes two sums to fall from ``start`` to half of h, or hardly ever
    to have got so far: within ±w a share of π²/8w² leaves a step."""
    limit = h - start + 1
    leaves = max(1 / limit - 20 * k, 1e-9)
    return min((start - h / 2) / max(k, 1e-9), 20 * limit / leaves)


def _nodes(h: float) -> int:
    return 16 + math.ceil(1.6 * h)


def _both_high(k: float, h: float, shift: float, start: float, up: float, down: float) -> float:
    """Run length of two sums that both begin at ``start``; ``up`` and ``down`` are those of each by
    itself, from 0.

    While both are above 0 they fall together by 2k a step. Half their difference wanders by itself
    between two limits, which widen by k a step, until neither can signal before the other is 0:
    from then on :func:`either` is exact.
    """
    inverse = 1 / up + 1 / down
    if inverse == 0:
        return math.inf
    even = shift == 0  # to either side alike: of the difference only the size is followed

    def chance(before: Array, after: Array) -> Array:
        moves = density(after - before[:, None] - shift)
        return moves + density(after + before[:, None]) if even else moves

    stage = max(1, min(_STAGE_STEPS, int(_STAGE_WIDTH / max(k, 1e-9))))
    ends, width = 2 * np.arange(stage) / stage - 1, stage * k
    outer_nodes = width / 2 * (gauss_legendre(_OUTER)[0] + 1)
    outer_weights = width / 2 * upto(_OUTER, ends)
    mean, total = start, 1.0
    at, arriving = np.zeros(1), np.ones(1)
    while mean > h / 2 + k:
        # What is inside the limits at the stage's first step, and what they widen by until its end.
        limit, before = h - mean + k, at
        low = 0.0 if even else -limit
        half = (limit - low) / 2
        # Few different numbers of nodes: they take long to find.
        nodes, weights = gauss_legendre(16 * math.ceil(1 + 0.2 * half))
        outer = limit + outer_nodes
        inner_weights = np.broadcast_to(half * weights, (stage, nodes.size))
        parts = [(low + half * (nodes + 1), inner_weights), (outer, outer_weights)]
        if not even:
            parts.append((-outer, outer_weights))
        at = np.concatenate([part for part, _ in parts])
        all_weights = np.concatenate([part for _, part in parts], axis=1)
        steps = min(stage, math.ceil((mean - h / 2 - k) / max(k, 1e-9)))
        followed = np.empty((steps, at.size))
        chances, moves = arriving @ chance(before, at), chance(at, at)
        for now, then in zip(followed, all_weights, strict=False):
            np.multiply(chances, then, out=now)
            np.dot(now, moves, out=chances)
        mean -= steps * k
        arriving = followed[-1]
        both = followed.sum(axis=1)
        total += float(both[:-1].sum())
        if mean > h / 2 + k:
            total += float(both[-1])
        if both[-1] / inverse < _NEGLIGIBLE * total:
            return total
    # As either has it: times that from (0, 0), the upper sum's share plus the lower's less 1.
    both_ways = np.concatenate((mean + at, mean - at))
    from_up = _share(k, h, shift, up, both_ways)
    from_down = from_up if even else _share(k, h, -shift, down, both_ways)
    shares = from_up[: at.size] + from_down[at.size :] - 1
    return total + float(arriving @ shares) / inverse


def _share(k: float, h: float, shift: float, zero: float, sums: Array) -> Array:
    """Run lengths of the upper sum from each of ``sums``, by its integral equation, as shares of
    that from 0."""
    if zero == math.inf:
        return np.ones(sums.size)
    moves, absorbed = _moves(k, h, shift, 0.0)
    lengths = steps_to_absorption(moves, absorbed)[:-1]
    nodes, weights = gauss_legendre(lengths.size - 1)
    moves = density(h / 2 * (nodes + 1) - sums[:, None] - (shift - k)) * (h / 2 * weights)
    return np.asarray(1 + sf_array(sums + shift - k) * lengths[0] + moves @ lengths[1:]) / zero


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

    @cache
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
    near = increasing_root(excess, guess, slope, 1e-5, _HIGHEST, jump=_CLOSE)
    jump = round(near / (clip - k)) * (clip - k)
    if abs(near - jump) < _CLOSE * near and excess(jump * (1 - _JUMP)) < 0 < excess(
        jump * (1 + _JUMP)
    ):
        return (1 + _JUMP) * jump
    return (1 + _JUMP) * increasing_root(excess, near, slope, 1e-5, _HIGHEST, jump=_JUMP)


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
