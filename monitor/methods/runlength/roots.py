"""Where an increasing function of a positive number crosses zero, in few evaluations.

Knows one function of one number. Must not know what it computes.
"""

from __future__ import annotations

import math
from collections.abc import Callable


def increasing_root(
    f: Callable[[float], float],
    guess: float,
    slope: float,
    tolerance: float = 1e-7,
    most: float = math.inf,
    *,
    jump: float = 0.0,
) -> float:
    """The x > 0 with |f(x)| ≤ ``tolerance``, for an increasing ``f``.

    ``guess`` is a positive first try, ``slope`` roughly how fast f rises there. The secant method,
    kept inside the bracket that the signs of f have shown: three or four evaluations where f is
    nearly straight, as log run lengths are. Where f jumps past zero, the point just beyond, within
    a share ``jump`` of it. ValueError where f has no root up to ``most``.
    """
    low, high = 0.0, math.inf
    x, value = guess, f(guess)
    for _ in range(100):
        if abs(value) <= tolerance:
            return x
        if low > 0 and high - low < jump * high:
            return high
        if value < 0:
            low = x
        else:
            high = x
        following = x - value / slope
        if not low < following < min(high, 8 * x + 1, most):
            following = min(2 * x, most) if high == math.inf else (low + high) / 2
        if following in (low, high):
            break
        there = f(following)
        secant = (there - value) / (following - x)
        slope = secant if secant > 0 else math.nan
        x, value = following, there
    raise ValueError("no setting gives that run length")
