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


def inflation(correlation: Array, count: int) -> float:
    """1 + 2Σρ: the variance of a long mean, over what it would be of independent values.

    The sum ends where two neighbours together are no longer positive, by twice the error that
    ``count`` values leave them with, and their sums are made never to rise (C. J. Geyer 1992,
    Statistical Science 7: initial monotone sequence; the allowance is ours: without it, noise adds
    up). The count over this is the effective number of values.
    """
    noise = 2 * math.sqrt(2 / count)
    if not np.isfinite(correlation).all():
        return 1.0
    total, least = -1.0, math.inf
    for first in range(0, len(correlation) - 1, 2):
        pair = float(correlation[first] + correlation[first + 1])
        if pair <= noise and first:
            break
        least = min(least, pair)
        total += 2 * least
    return max(total, 1e-3)
