"""The F distribution, and the one-way analysis of variance that rests on it.

Knows ratios of mean squares. Must not know what groups are.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from monitor.methods.normal import Array

_TINY = 1e-300
_TERMS = 20_000


def f_sf(ratio: float, above: float, below: float) -> float:
    """P(F > ratio) with ``above`` and ``below`` degrees of freedom (Abramowitz & Stegun 26.6.2)."""
    if ratio <= 0 or math.isnan(ratio):
        return 1.0
    if math.isinf(ratio):
        return 0.0
    return _beta(below / 2, above / 2, below / (below + above * ratio))


def f_cdf(ratio: float, above: float, below: float) -> float:
    """P(F ≤ ratio)."""
    return f_sf(1 / ratio, below, above) if ratio > 0 else 0.0


def _beta(a: float, b: float, x: float) -> float:
    """The regularised incomplete beta function, by its continued fraction (Abramowitz & Stegun
    26.5.8), evaluated forwards (W. J. Lentz 1976, Applied Optics 15)."""
    if x <= 0 or x >= 1:
        return 0.0 if x <= 0 else 1.0
    if x > (a + 1) / (a + b + 2):
        return 1 - _beta(b, a, 1 - x)
    front = math.exp(
        math.lgamma(a + b) - math.lgamma(a) - math.lgamma(b) + a * math.log(x) + b * math.log1p(-x)
    )
    c, d = 1.0, 1 / _away(1 - (a + b) * x / (a + 1))
    value = d
    for m in range(1, _TERMS):
        even = m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m))
        d, c = 1 / _away(1 + even * d), _away(1 + even / c)
        value *= c * d
        odd = -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1))
        d, c = 1 / _away(1 + odd * d), _away(1 + odd / c)
        value *= c * d
        if abs(c * d - 1) < 1e-14:
            break
    return front * value / a


def _away(value: float) -> float:
    return value if abs(value) > _TINY else _TINY


@dataclass(frozen=True, slots=True)
class Comparison:
    """Whether groups have one mean: F with its degrees of freedom, and the chance of one so large
    if they have. ``share`` is the part of the variance that lies between them."""

    ratio: float
    above: float
    below: float
    p: float
    share: float


def compare(
    counts: Array, means: Array, variances: Array, inflations: Array | float = 1.0
) -> Comparison | None:
    """One-way analysis of variance of groups, from each group's count, mean and variance.

    ``inflations``: by how much a group's values count for less than as many independent ones. None
    with fewer than two groups, or nothing that varies within them.
    """
    groups, total = len(counts), float(counts.sum())
    effective = float((counts / inflations).sum())
    within = float((counts - 1) @ variances)
    if groups < 2 or within <= 0 or effective <= groups:
        return None
    worth = counts / inflations
    centre = float(worth @ means) / effective
    between = float(worth @ (means - centre) ** 2)
    mean_square = within / (total - groups)
    ratio = between / (groups - 1) / mean_square
    above, below = groups - 1.0, effective - groups
    spread = max(0.0, between - (groups - 1) * mean_square) / effective
    return Comparison(
        ratio, above, below, f_sf(ratio, above, below), spread / (spread + mean_square)
    )
