"""Whether slow swings are stronger than quicker ones foretell: for recordings that are short.

Knows periodograms. Must not know charts or baselines.

A process whose values follow each other only for a while has as much power in its slowest swings as
in somewhat quicker ones; one that walks, steps or drifts has most of it in the slowest.
"""

from __future__ import annotations

import cmath
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.methods.autocorrelation import correlations
from monitor.methods.normal import Array

SLOW, QUICK = 6, 24
"""The slowest swing lasts as long as the series, the last of the slow ones a sixth of it, the last
of the quick ones a twenty-fourth."""

LEAST = 100
"""Values of a series: in fewer, the quick swings are hardly slower than values that follow each
other."""

_ORDER = np.arange(1, QUICK + 1)
_WEIGHTS = 1.0 / _ORDER[:SLOW] ** 2
"""As the power of a walk falls (and so as the test that is best against a small one weighs it:
J. Nyblom 1989, J. American Statistical Association 84)."""
_WEIGHTS = _WEIGHTS / _WEIGHTS.sum()

_DRAWS, _SEED = 20_000, 7_870


@dataclass(frozen=True, slots=True)
class Swings:
    """``growth``: the power of slow swings over what quicker ones foretell; ``p``: the chance of
    such a one in series whose values follow each other for a short while, or not at all."""

    growth: float
    p: float


def swings(series: Sequence[Array]) -> Swings | None:
    """Of several series together, each about its own mean and as long as it is; those below
    ``LEAST`` values are passed over. None where none is left, or nothing varies.

    What comes of neighbours that follow each other is taken out first, by an autoregression of
    second order (prewhitening, R. B. Blackman & J. W. Tukey 1958). Of what is left, independent
    normal values would have an exponential power at each frequency, independent of the others: the
    chance is simulated with those, always the same way.
    """
    used = [each for each in series if len(each) >= LEAST]
    correlation = correlations(used, 2)
    if not np.isfinite(correlation).all():
        return None
    first, second = _autoregression(correlation)
    power = np.zeros(QUICK)
    for each in used:
        spectrum = np.abs(np.fft.rfft(each - each.mean())[1 : QUICK + 1]) ** 2 / len(each)
        turn = np.exp(-2j * cmath.pi * _ORDER / len(each))
        power += spectrum * np.abs(1 - first * turn - second * turn**2) ** 2
    quick = float(power[SLOW:].mean())
    if quick <= 0:
        return None
    growth = float(_WEIGHTS @ power[:SLOW]) / quick
    return Swings(growth, _chance(growth, len(used)))


def _autoregression(correlation: Array) -> tuple[float, float]:
    """The two weights by G. U. Yule 1927 and G. Walker 1931, from correlations at lags 0 to 2."""
    _, one, two = correlation.tolist()
    return one * (1 - two) / (1 - one * one), (two - one * one) / (1 - one * one)


def _chance(growth: float, count: int) -> float:
    """P(as large a growth) in ``count`` series: their powers add up to gamma variables."""
    draws = np.random.default_rng(_SEED)
    slow = draws.standard_gamma(count, (_DRAWS, SLOW)) @ _WEIGHTS / count
    freedom = count * (QUICK - SLOW)
    quick = draws.standard_gamma(freedom, _DRAWS) / freedom
    return (1 + int(np.count_nonzero(slow >= growth * quick))) / (1 + _DRAWS)
