"""How late drifts were caught: points of the distribution, with intervals from resampled hours.

Knows delays and the hours their drifts began in. Must not know detectors.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from replay.readings import Places, Values
from replay.tuning.result import Quantile, Range

HOUR = 3_600.0
_FEWEST = 12
"""Blocks: where a recording has fewer hours, shorter stretches take their place."""

_RESAMPLES = 300


class Resampling:
    """Weights of drifts when whole hours are drawn again with replacement (B. Efron 1979, Annals of
    Statistics 7, in blocks since neighbouring drifts meet the same readings)."""

    def __init__(self, began: Values, rng: np.random.Generator) -> None:
        """``began``: the running second at which each drift began."""
        span = float(np.ptp(began)) if len(began) else 0.0
        length = min(HOUR, span / _FEWEST) if span > 0 else HOUR
        _, block = np.unique(np.floor((began - began.min(initial=np.inf)) / length).astype(int),
                             return_inverse=True)  # fmt: skip
        blocks = int(block.max(initial=-1)) + 1
        drawn = rng.integers(blocks, size=(_RESAMPLES, blocks)) if blocks else np.zeros((1, 0), int)
        counts = np.zeros((len(drawn), blocks), np.int64)
        np.add.at(counts, (np.arange(len(drawn))[:, None], drawn), 1)
        self._weights: Places = counts[:, block]

    def quantiles(self, delays: Values, probabilities: Sequence[float]) -> list[Quantile]:
        """For each of ``probabilities``, the delay that this share of the drifts is caught within;
        inf stands for drifts not caught."""
        if not len(delays):
            return [Quantile(None, None) for _ in probabilities]
        order = np.argsort(delays, kind="stable")
        rising = delays[order]
        weights = self._weights[:, order].cumsum(axis=1)
        total = weights[:, -1:]
        found = []
        for probability in probabilities:
            value = float(rising[math.ceil(probability * len(rising)) - 1])
            if not math.isfinite(value):
                found.append(Quantile(None, None))
                continue
            places = (weights < probability * total).sum(axis=1)
            drawn = np.sort(rising[np.minimum(places[total[:, 0] > 0], len(rising) - 1)])
            low = float(drawn[int(0.05 * len(drawn))])
            high = float(drawn[min(int(0.95 * len(drawn)), len(drawn) - 1)])
            found.append(Quantile(value, Range(low, high if math.isfinite(high) else None)))
        return found
