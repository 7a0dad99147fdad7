"""Run lengths of the EWMA, and the width and weight that give a wanted one.

Knows weighted averages of normal values. Must not know sigma, streams or alerts.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np

from monitor.methods.normal import Array, density, sf, upper_quantile
from monitor.methods.runlength.averages import Average, ClippedAverage
from monitor.methods.runlength.chains import Side
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import Wait, chain

_SLOW = 0.03
"""A weight of which exact limits settle so slowly that clipped values make up normal averages."""

_NEAR = 1.0
"""A shift up to which exact limits make a small difference to clipped values."""

_NEGLIGIBLE = 1e-9
"""Share of a run length that is left out."""

_CLIPPED_TOLERANCE = 1e-3
"""Of a run length of clipped values, whose own error is larger."""

_NEAR_ENOUGH = 0.1
"""Of run lengths at two widths, at which exact limits cost as many points."""

_JUMP = 1e-6
"""Of a width, where their run length jumps."""

_LEAST = 0.003
"""Weight worth trying: at less, hundreds of points are needed to see any shift."""


def run_length(
    lam: float,
    width: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    asymptotic: bool = False,
    clip: float | None = None,
) -> float:
    """Average run length of an EWMA of weight ``lam`` with limits ``width`` of its standard errors.

    S. V. Crowder 1987's integral equation; with exact limits (J. M. Lucas & M. S. Saccucci 1990) it
    is stepped on until they have settled. ``clip`` limits each value. Relative error below 2e-3
    with exact limits, else 1e-5; with a ``clip``, it and the width 2 or more, 3e-2 (5e-2 where
    shifts above 1 are signalled within a few points).
    Check: λ 0.1, width 2.814, asymptotic: 499.6 at shift 0, 10.33 at 1.
    """
    off = -shift if direction == "down" else shift
    if clip is None:
        return _length(Average.of(lam, width, off, direction), lam, asymptotic)
    near_the_mean = abs(shift) <= _NEAR
    # The cells' error falls with the square of their number: extrapolate from two (Richardson).
    rough, close = (
        ClippedAverage.limited(lam, width, off, direction, clip, each) for each in (2, 1)
    )
    far, near = (_length(each, lam, asymptotic or near_the_mean) for each in (rough, close))
    if math.inf in (far, near):
        return near
    finer = (close.nodes.size - 1) / (rough.nodes.size - 1)
    length = near * math.pow(near / far, 1 / (finer * finer - 1))
    if asymptotic or not near_the_mean:
        return length
    return length * _settling(lam, width, shift, direction, clip)


def _settling(lam: float, width: float, shift: float, direction: Side, clip: float) -> float:
    """What exact limits do to the run length of clipped values that settled ones have.

    A rough computation tells it; where they settle slowly, normal values of the same mean and
    spread, as many values make up an average then.
    """
    off = -shift if direction == "down" else shift
    if lam < _SLOW:
        mean, sd = _clipped(off, clip)
        average = Average.of(lam, width / sd, mean / sd, direction)
    else:
        average = ClippedAverage.limited(lam, width, off, direction, clip, 2)
    settled = average.settled()
    return _exact_length(average, lam, settled) / float(settled[-1])


def _clipped(shift: float, clip: float) -> tuple[float, float]:
    """Mean and standard deviation of a normal value about ``shift`` limited to ± ``clip``."""
    low, high = -clip - shift, clip - shift
    (at_low, at_high), inside = density(np.array([low, high])), sf(low) - sf(high)
    mean = low * sf(-low) + high * sf(high) + at_low - at_high
    square = low * low * sf(-low) + high * high * sf(high) + inside + low * at_low - high * at_high
    return shift + float(mean), math.sqrt(max(float(square - mean * mean), 1e-9))


def _length(average: Average, lam: float, asymptotic: bool) -> float:
    settled = average.settled()
    return float(settled[-1]) if asymptotic else _exact_length(average, lam, settled)


def _exact_length(average: Average, lam: float, settled: Array) -> float:
    """With exact limits; ``settled`` are the average's run lengths with settled ones."""
    if not np.isfinite(settled).all():
        return math.inf
    states, total, longest = np.ones(1), 1.0, settled.max()
    for moves, steps in average.settling(lam):
        passed = np.zeros(moves.shape[1])
        for _ in range(steps):
            states = states @ moves
            passed += states
        total, left = total + float(passed.sum()), float(states.sum())
        if left * longest < _NEGLIGIBLE * total:
            return total
    return total - left + float(states @ settled[:-1])


def wait(
    lam: float,
    width: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    asymptotic: bool = False,
    clip: float | None = None,
) -> Wait:
    """The chance to have given no signal yet, point after point; arguments as of
    :func:`run_length`, with whose ``clip`` slow weights are followed with settled limits."""
    off = -shift if direction == "down" else shift
    average = (
        Average.of(lam, width, off, direction)
        if clip is None
        else ClippedAverage.limited(lam, width, off, direction, clip)
    )
    asymptotic = asymptotic or (clip is not None and lam < _SLOW)
    first = [(average.moves(np.zeros(1), 0.0, average.add), 1)]
    states = np.ones(1)
    for moves, steps in first if asymptotic else average.settling(lam):
        for _ in range(steps):
            states = states @ moves
            yield float(states.sum())
    yield from chain(states, average.moves(average.nodes, average.keep, average.add))


def width_for(
    lam: float,
    wanted: float,
    shift: float = 0.0,
    *,
    direction: Side = "both",
    asymptotic: bool = False,
    clip: float | None = None,
) -> float:
    """The width whose run length at ``shift`` is ``wanted``, to 1e-7 of it
    (2e-5 with exact limits, 2e-3 with ``clip``). Check, asymptotic, at shift 0: λ 0.1 and 500 give
    2.814. ValueError where no width has.
    """
    if clip is not None:
        return _clipped_width(lam, wanted, shift, direction, asymptotic, clip)
    if asymptotic:
        return _settled_width(lam, wanted, shift, direction, 1e-7)
    return _exact_width(lam, wanted, shift, direction)


def _clipped_width(
    lam: float, wanted: float, shift: float, direction: Side, asymptotic: bool, clip: float
) -> float:
    # Values at the clip for ever take the average to it.
    most = clip * math.sqrt((2 - lam) / lam)

    @cache
    def length(width: float, settled: bool) -> float:
        return run_length(lam, width, shift, direction=direction, asymptotic=settled, clip=clip)

    def found(settled: bool, target: float, guess: float, slope: float) -> float:
        return increasing_root(
            lambda width: math.log(length(width, settled) / target),
            *(guess, slope, _CLIPPED_TOLERANCE, most),
            jump=_JUMP,
        )

    # Many values make up an average, which is nearly as if they were normal then.
    mean, sd = _clipped(shift, clip)
    guess = min(sd * _settled_width(lam, wanted, mean / sd, direction, 1e-3), 0.98 * most)
    longer, width, near = wanted, guess, asymptotic
    while True:
        settled = length(width, True)
        if not asymptotic and settled < math.inf:
            # Exact limits cost about as many points at any width near this one.
            longer = wanted + settled * (1 - _settling(lam, width, shift, direction, clip))
        near = near or abs(settled - longer) < _NEAR_ENOUGH * longer
        width = found(True, longer, width, guess)
        if near:
            break
        near = True
    if abs(longer - wanted) > 2 * _CLIPPED_TOLERANCE * wanted:
        slope = _slope(width - _centre(lam, shift, direction))
        width = found(False, wanted, width, slope)
    if length(width, True) == math.inf:
        raise ValueError("no setting gives that run length")
    return width


def _exact_width(lam: float, wanted: float, shift: float, direction: Side) -> float:
    def excess(width: float) -> float:
        return math.log(run_length(lam, width, shift, direction=direction) / wanted)

    settled = _settled_width(lam, wanted, shift, direction, 5e-6)
    short = -excess(settled)
    if abs(short) < 1.2e-5:
        return settled
    # Exact limits cost about as many points at any width.
    longer = wanted * (1 - math.expm1(-short))
    near = 5e-6 if abs(short) < 0.05 else 1e-3
    guess = _settled_width(lam, longer, shift, direction, near, settled)
    return increasing_root(excess, guess, short / (guess - settled), 1e-5)


def _settled_width(
    lam: float,
    wanted: float,
    shift: float,
    direction: Side,
    tolerance: float,
    guess: float | None = None,
) -> float:
    def excess(width: float) -> float:
        length = run_length(lam, width, shift, direction=direction, asymptotic=True)
        return math.log(length / wanted)

    centre = _centre(lam, shift, direction)
    guess = guess or max(0.1, centre + _reach(lam, wanted, shift, direction))
    return increasing_root(excess, guess, _slope(guess - centre), tolerance)


def _reach(lam: float, wanted: float, shift: float, direction: Side) -> float:
    """A first guess at how far above the centre the width lies: points taken as independent or, for
    a small λ, as a continuous process that crosses w at the rate λ·w·φ(w) (S. O. Rice 1944), seen
    only at steps (H. Chernoff 1965, Ann. Math. Statist. 36)."""
    each_side = wanted * (2 if direction == "both" and shift == 0 else 1)
    reach = independent = upper_quantile(min(0.3, 1 / each_side))
    for _ in range(3):
        reach = math.sqrt(2 * math.log(max(1.1, 0.4 * lam * reach * each_side)))
    return min(reach - 0.583 * math.sqrt(lam * (2 - lam)), independent)


def _centre(lam: float, shift: float, direction: Side) -> float:
    """What the average settles at, in its standard errors, towards the nearer limit."""
    centre = (-shift if direction == "down" else shift) * math.sqrt((2 - lam) / lam)
    return abs(centre) if direction == "both" else centre


def _slope(reach: float) -> float:
    """How fast ln(run length) rises with a width ``reach`` above the centre: of 1/(w·φ(w))."""
    return max(reach, 1.5) - 1 / max(reach, 1.5)


def best_weight(
    shift: float, wanted: float, ignored: float = 0.0, *, direction: Side = "both"
) -> float:
    """The λ that signals a ``shift`` > 0 soonest among those whose run length at the shift
    ``ignored`` is ``wanted``.

    To about 5 %, within which the delay hardly moves, and not below 0.003, nor below a hundredth of
    ``ignored``, where too much lies between the mean and its limit to compute. Judged with settled
    limits: a shift meets an average that has long been running. One side takes the λ of two that
    ring as often each: for short run lengths a tiny λ would else be best, whose limit lies where
    the average begins, and is passed at once, shift or none. ValueError where no λ has it.
    """
    if direction != "both" and not ignored:
        wanted *= 2

    def delay(log_lam: float) -> float:
        lam = math.exp(log_lam)
        try:
            width = _settled_width(lam, wanted, ignored, "both", 1e-3)
        except ValueError:
            return math.inf
        return run_length(lam, width, shift, asymptotic=True)

    step = 0.4
    lowest = min(math.log(max(_LEAST, ignored / 100)), -step)
    guess = 0.75 * shift * (shift - ignored) / math.log(wanted)
    at = min(max(math.log(guess), lowest), -step)
    delays = {at: delay(at)}
    while True:
        for neighbour in (max(at - step, lowest), min(at + step, 0.0)):
            if neighbour not in delays:
                delays[neighbour] = delay(neighbour)
        # Short run lengths are had with large weights only.
        best = min(delays, key=lambda tried: (delays[tried], -tried))
        if best == at:
            break
        at = best
    if delays[at] == math.inf:
        raise ValueError("no setting gives that run length")
    left, right = max(at - step, lowest), min(at + step, 0.0)
    # The vertex of the parabola through the three, where it is one.
    below, above = delays[left] - delays[at], delays[right] - delays[at]
    rise, run = at - left, right - at
    bend = 2 * (below * run + above * rise)
    if at in (left, right) or not 0 < bend < math.inf:
        return math.exp(at)
    return math.exp(at + (below * run * run - above * rise * rise) / bend)
