"""How often a statistic passes a level, from its largest peaks, and how sure that is.

Knows peaks and counts. Must not know detectors or time: intervals are in subgroups.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.methods.runlength.variance_cusum import decay
from replay.readings import Places, Values

ABOVE = 100
FEWEST = 25
"""So many of the largest peaks carry the fit; of few peaks a tenth of them, but no fewer than
twenty-five; and these must be no more than a quarter."""

Z90 = 1.645
_NEAR = 20  # subgroups; peaks as near as this in one stream count as one event
_FORM = 1.1
_KEPT = 5_000
_LOWEST = 1.1  # of a level of averages, in standard errors
FAR = 50
"""An interval of more than so many times what was seen is not told."""


@dataclass(frozen=True, slots=True)
class PooledPeaks:
    """Peaks of all streams: ``level``, and ``place``, a number in which peaks of one stream lie as
    far apart as their subgroups, those of different streams very far. ``subgroups`` were seen."""

    level: Values
    place: Places
    subgroups: int


@dataclass(frozen=True, slots=True)
class TailFit:
    """An exponential tail above a threshold (J. Pickands 1975, Annals of Statistics 3, with shape
    0: what sums of a falling walk have, and squares of normal values nearly).

    ``levels`` are the largest peaks, falling. With g as :func:`scale_of`, the chance that
    a subgroup reaches a level above ``threshold`` is ``rate`` · exp(−(g − g(threshold))/``scale``).
    ``independent`` is how many of the peaks above the threshold are events of their own;
    ``variation`` the coefficient of variation of their excesses, 1 for an exponential tail;
    ``usual`` the scale where readings are normal, None where it does not matter.
    """

    levels: Values
    subgroups: int
    above: int
    threshold: float
    rate: float
    scale: float
    weight: float | None
    unit: float
    independent: float
    variation: float
    usual: float | None

    @property
    def exponential(self) -> bool:
        """Whether the excesses look so (J. del Castillo, J. Daoudi & R. Lockhart 2014, Scandinavian
        Journal of Statistics 41, judge by the coefficient of variation as well), and are not
        :attr:`heavy`: a hundred peaks of a heavy tail may well look exponential, and go on
        heavier."""
        return abs(self.variation - 1.0) <= self._doubt and not self.heavy

    @property
    def heavy(self) -> bool:
        """Whether what nothing clips falls off more slowly than where readings are normal, with the
        ``usual`` scale."""
        return self.usual is not None and self.scale > self.usual * (1.0 + self._doubt)

    @property
    def _doubt(self) -> float:
        return 2.5 / math.sqrt(self.above)

    def interval(self, level: float) -> float:
        """Subgroups from one passing of ``level`` to the next; inf where no float holds it."""
        if level >= self.threshold:
            exponent = scale_of(level, self.weight, self.unit) - scale_of(
                self.threshold, self.weight, self.unit
            )
            exponent /= self.scale
            return math.exp(exponent) / self.rate if exponent < 700 else math.inf
        passed = int(np.searchsorted(-self.levels, -level, side="left"))
        return self.subgroups / max(passed, 1)

    def level(self, interval: float) -> float:
        """The level passed once in ``interval`` subgroups; the lowest kept for shorter ones."""
        wanted = self.subgroups / interval
        if wanted <= self.above:
            g = scale_of(self.threshold, self.weight, self.unit) + self.scale * math.log(
                interval * self.rate
            )
            g = max(g, scale_of(self.threshold, self.weight, self.unit))
            return _level_at(g, self.weight, self.unit)
        upper = min(int(wanted), len(self.levels) - 1)
        return float((self.levels[upper - 1] + self.levels[upper]) / 2)

    def deviation(self, interval: float) -> float:
        """Standard deviation of the logarithm of an estimated ``interval``: that of the rate at the
        threshold, and that of the scale over the distance to it, and a tenth more for what the
        form of the tail leaves open (tests/tuning/test_honesty.py: without it stated 90 % held in
        82 to 98 % of simulated recordings)."""
        beyond = max(math.log(interval * self.rate), 0.0) if interval < math.inf else math.inf
        seen = max(self.subgroups / interval, self.above) * self.independent / self.above
        return _FORM * math.sqrt((1 + beyond**2) / max(seen, 1.0))

    def factor(self, interval: float) -> float:
        """The truth lies within ``interval`` ×/÷ this, with 90 %."""
        exponent = Z90 * self.deviation(interval)
        return math.exp(exponent) if exponent < 700 else math.inf

    def _scaled(self, level: float) -> float:
        return scale_of(level, self.weight, self.unit)

    def supports(self) -> float:
        """The longest interval that may be told."""
        return FAR * float(self.subgroups)


def fit(
    peaks: PooledPeaks, weight: float | None, unit: float = 1.0, usual: float | None = None
) -> TailFit | None:
    """The tail of ``peaks``, with ``weight`` and ``unit`` as :func:`scale_of` has them, and the
    scale that is ``usual`` as :class:`TailFit` has it; None where peaks are too few."""
    count = len(peaks.level)
    if count < 4 * FEWEST:
        return None
    above = min(ABOVE, max(FEWEST, count // 10))
    kept = min(count, max(_KEPT, peaks.subgroups // 20))
    largest = np.argpartition(peaks.level, count - kept)[count - kept :]
    order = largest[np.argsort(-peaks.level[largest], kind="stable")]
    levels = peaks.level[order]
    threshold = float(levels[above - 1])
    rest = scale_of(threshold, weight, unit)
    excess = np.array(
        [scale_of(each, weight, unit) - rest for each in levels[: above - 1].tolist()]
    )
    mean = float(excess.mean())
    if not mean > 0:
        return None
    return TailFit(
        levels=levels,
        subgroups=peaks.subgroups,
        above=above,
        threshold=threshold,
        rate=above / peaks.subgroups,
        scale=mean,
        weight=weight,
        unit=unit,
        independent=_clusters(peaks.place[order[:above]]),
        variation=float(excess.std(ddof=1)) / mean,
        usual=usual,
    )


def pooled(
    level: Sequence[Values], place: Sequence[Places], length: Sequence[int], subgroups: int
) -> PooledPeaks:
    """Peaks of several streams; ``length`` is each stream's, in subgroups."""
    apart = np.cumsum([0, *(each + 10 * _NEAR for each in length)])
    return PooledPeaks(
        np.concatenate([np.empty(0), *level]),
        np.concatenate(
            [np.empty(0, np.int64), *(p + a for p, a in zip(place, apart, strict=False))]
        ),
        subgroups,
    )


def _clusters(places: Places) -> float:
    """How many events peaks at these places are (the runs estimator of R. L. Smith & I. Weissman
    1994, Journal of the Royal Statistical Society B 56)."""
    return 1.0 + float(np.count_nonzero(np.diff(np.sort(places)) > _NEAR))


def scale_of(level: float, weight: float | None, unit: float = 1.0) -> float:
    """g: in it the logarithm of how often ``level`` is passed falls evenly.

    For sums (``weight`` None) the level itself. For an average of that weight λ (1: single points),
    which is nearly normal, h²/2 − ln(h·ν(h√(2λ))), with h the level in ``unit``, the average's own
    standard deviation where that is not what its limits suppose: how often an autoregression
    passes a high level (D. Siegmund 1985, Sequential Analysis; ν as in D. Siegmund & B. Yakir 2007,
    The Statistics of Gene Mapping, from memory).
    """
    if weight is None:
        return level
    h = max(level / unit, _LOWEST)
    x = h * math.sqrt(2 * weight) / 2
    below = 0.5 * math.erfc(-x * math.sqrt(0.5))
    density = math.exp(-x * x / 2) / math.sqrt(2 * math.pi)
    nu = (below - 0.5) / x / (x * below + density)
    return h * h / 2 - math.log(h * nu)


def _level_at(g: float, weight: float | None, unit: float) -> float:
    """The inverse of :func:`scale_of`, by bisection."""
    if weight is None:
        return g
    low, high = _LOWEST, math.sqrt(2 * abs(g)) + 5
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if scale_of(middle, weight) < g else (low, middle)
    return high * unit


def of_variances(k: float, ratio: float, size: int) -> float | None:
    """The scale of the tail of a sum of s²/σ² − k over subgroups of ``size`` normal readings whose
    variance is ``ratio`` σ²; None where the sum has no rest to return to, or never leaves it."""
    if size < 2 or not 0 < ratio < k:
        return None
    return ratio / decay(k / ratio, size - 1, "up")
