"""Run lengths of the tabular CUSUM, and the decision interval that gives a wanted one.

Knows sums of normal values. Must not know sigma, streams or alerts.
"""

from __future__ import annotations

import math

import numpy as np

from monitor.methods.normal import Array, density, sf, sf_array
from monitor.methods.quadrature import gauss_legendre
from monitor.methods.runlength.chains import Side, either, steps_to_absorption
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import Wait, chain

_HIGHEST = 300.0


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
    J. M. Lucas & R. B. Crosier 1982, exact because the two sums cannot both be high. Relative error
    below 1e-6, with ``clip`` 1e-3. Check: k 0.5, h 5: 465.4 at shift 0, 10.38 at 1.
    """
    if clip is not None and clip <= k:
        raise ValueError(f"clip {clip} leaves nothing above k {k}: the sums would never rise")
    if h > _HIGHEST:
        raise ValueError(f"h {h:g} is beyond {_HIGHEST:g}, as far as run lengths are computed")
    if direction != "both":
        return _one_side(k, h, shift if direction == "up" else -shift, head_start, clip)[1]
    up = _one_side(k, h, shift, head_start, clip)
    down = up if shift == 0 else _one_side(k, h, -shift, head_start, clip)
    return either(up, down)


def wait(k: float, h: float, shift: float, head_start: float = 0.0) -> Wait:
    """Of the upper sum, the chance to have given no signal yet, point after point."""
    if h > _HIGHEST:
        raise ValueError(f"h {h:g} is beyond {_HIGHEST:g}, as far as run lengths are computed")
    moves, _ = _moves(k, h, shift, head_start * h)
    start = np.zeros(len(moves))
    start[-1] = 1.0
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
    """The h whose run length at ``shift`` is ``wanted``, to 1e-7 of it (1e-5 with ``clip``).

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
    return increasing_root(excess, guess, slope, 1e-7 if clip is None else 1e-5, _HIGHEST)


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
    fine = max(80, math.ceil(6 * h))
    rough = _clipped(k, h, shift, start, clip, fine // 2)
    close = _clipped(k, h, shift, start, clip, fine)
    zero, started = (c * (c / r) ** (1 / 3) for r, c in zip(rough, close, strict=True))
    return zero, started


def _smooth(k: float, h: float, shift: float, start: float) -> tuple[float, float]:
    steps = steps_to_absorption(*_moves(k, h, shift, start))
    return float(steps[0]), float(steps[-1])


def _moves(k: float, h: float, shift: float, start: float) -> tuple[Array, Array]:
    """E. S. Page's integral equation by Gauss–Legendre quadrature, an atom at 0 before the nodes,
    the start behind them (J. M. Lucas & R. B. Crosier 1982, appendix): probabilities of moving, and
    of signalling."""
    nodes, weights = gauss_legendre(16 + math.ceil(1.6 * h))
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
) -> tuple[float, float]:
    """A Markov chain on cells (D. Brook & D. A. Evans 1972) for values limited to ± ``clip``.

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
    sums = np.concatenate((ladders[0], centres, ladders[1]))
    states = np.arange(sums.size)
    cell = states[ladders[0].size : -ladders[1].size]

    values = np.clip(borders[None, :] - sums[:, None] + k, -clip, clip)
    above = sf_array(values - shift)
    top, bottom = sf(clip - shift), sf(clip + shift)
    moves = np.zeros((sums.size, sums.size))
    moves[:, 0] = sf(-clip - shift) - above[:, 0]
    moves[:, cell] = above[:, :-1] - above[:, 1:]
    absorbed = above[:, -1] - top

    for rung in (states[: cell[0]], states[cell[-1] + 1 :]):
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
    steps = steps_to_absorption(moves, absorbed)
    return float(steps[0]), float(steps[cell[-1] + 1])


def _ladder(foot: float, rise: float, h: float) -> Array:
    """The sums that clipped values alone reach from ``foot``, up to h itself."""
    return foot + rise * np.arange(1.0 + math.floor((h - foot) / rise + 1e-9))
