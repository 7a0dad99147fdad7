"""How far successive values follow each other, and what they are worth as independent ones.

Knows time series. Must not know subgroups or charts.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from monitor.methods import chi_square
from monitor.methods.normal import Array


def correlations(series: Sequence[Array], lags: int) -> Array:
    """Autocorrelations at lags 0 … ``lags`` of several series pooled, each about its own mean.

    The usual estimate with divisor N (G. E. P. Box & G. M. Jenkins 1970, Time Series Analysis,
    section 2.1.5), by the fast Fourier transform. nan where nothing varies.
    """
    sums = np.zeros(lags + 1)
    for each in series:
        count = len(each)
        if count < 2:
            continue
        size = 1 << (2 * count - 1).bit_length()
        spectrum = np.fft.rfft(each - each.mean(), size)
        products = np.fft.irfft(spectrum.real**2 + spectrum.imag**2, size)
        reach = min(lags + 1, count)
        sums[:reach] += products[:reach]
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(sums / sums[0])


def independence_p(correlation: Array, count: int, lags: int = 10) -> float:
    """The chance of correlations as large as these, over the first ``lags``, in ``count``
    independent values: G. M. Ljung & G. E. P. Box 1978, Biometrika 65."""
    lags = min(lags, len(correlation) - 1, count - 1)
    if lags < 1 or not np.isfinite(correlation).all():
        return 1.0
    at = np.arange(1, lags + 1)
    statistic = count * (count + 2) * float((correlation[1 : lags + 1] ** 2 / (count - at)).sum())
    return chi_square.sf(statistic, lags)


def memory(correlation: Array, count: int) -> Array:
    """What ``count`` values keep of their autocorrelations, lags 0 …, once noise is taken out.

    They end where two neighbours together are no longer positive, by twice the error that so many
    values leave them with, and the sums of two never rise (C. J. Geyer 1992, Statistical Science 7:
    initial monotone sequence; the allowance is ours: without it, noise adds up).
    """
    if not np.isfinite(correlation).all():
        return np.ones(1)
    noise = 2 * math.sqrt(2 / count)
    pairs = correlation[: len(correlation) // 2 * 2].reshape(-1, 2)
    sums = pairs.sum(axis=1)
    over = np.flatnonzero(sums[1:] <= noise)
    kept = 1 + int(over[0]) if len(over) else len(sums)
    never_rising = np.minimum.accumulate(sums[:kept])
    scale = np.divide(
        never_rising, sums[:kept], out=np.ones(kept), where=sums[:kept] > never_rising
    )
    return np.asarray((pairs[:kept] * scale[:, None]).ravel())


def inflation(memory: Array) -> float:
    """1 + 2Σρ: the variance of a long mean, over what it would be of independent values. The count
    over this is the effective number of values."""
    return max(1 + 2 * float(memory[1:].sum()), 1e-3)


def inflations(memory: Array, longest: int) -> Array:
    """1 + 2Σ(1 − j/m)ρⱼ, the same for means of m values, m from 1 to ``longest``."""
    lags = np.arange(min(len(memory), longest))
    correlation = np.where(lags > 0, memory[: len(lags)], 0.0)
    sums = np.full(longest, correlation.sum())
    moments = np.full(longest, (lags * correlation).sum())
    sums[: len(lags)] = np.cumsum(correlation)
    moments[: len(lags)] = np.cumsum(lags * correlation)
    return np.asarray(1 + 2 * (sums - moments / np.arange(1, longest + 1)))


def averaged(memory: Array, lam: float) -> float:
    """1 + 2Σ(1 − λ)ʲρⱼ: the variance of an exponentially weighted mean, over what it would be of
    independent values (the sum of its weights' products)."""
    lags = np.arange(1, len(memory))
    return max(1 + 2 * float(memory[1:] @ (1 - lam) ** lags), 1e-3)


def alike(memory: Array, length: int, count: int, chance: np.random.Generator) -> Array:
    """Normal series with these autocorrelations, shape (``length``, ``count``): standard values.

    By circulant embedding (C. R. Dietrich & G. N. Newsam 1997, SIAM J. Scientific Computing 18);
    what no series can have of an estimate, negative power, is set to 0. The end of each continues
    in its beginning: ``length`` is to be many times the memory's.
    """
    reach = min(len(memory), length // 2)
    around = np.zeros(length)
    around[:reach] = memory[:reach]
    around[length - reach + 1 :] = memory[reach - 1 : 0 : -1]
    power = np.maximum(np.fft.rfft(around).real, 0.0)
    both_ends = 1 if length % 2 == 0 else 0
    total = 2 * power.sum() - power[0] - both_ends * power[-1]
    scale = np.sqrt(power * length / total)
    noise = np.fft.rfft(chance.standard_normal((count, length)), axis=1)
    return np.ascontiguousarray(np.fft.irfft(noise * scale, length, axis=1).T)
