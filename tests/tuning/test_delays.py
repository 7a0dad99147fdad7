"""Points of delays and their intervals from resampled hours."""

from __future__ import annotations

import math

import numpy as np

from replay.tuning.delays import HOUR, Resampling
from replay.tuning.result import Quantile


def test_points_are_order_statistics() -> None:
    began = np.linspace(0, 40 * HOUR, 200)
    resampling = Resampling(began, np.random.default_rng(1))
    delays = np.random.default_rng(2).permutation(np.arange(1.0, 201.0))
    median, late = resampling.quantiles(delays, (0.5, 0.9))
    assert (median.value, late.value) == (100.0, 180.0)
    for found in (median, late):
        assert found.interval is not None
        assert found.interval.high is not None
        assert found.value is not None
        assert found.interval.low < found.value < found.interval.high


def test_intervals_hold_the_truth_where_hours_differ() -> None:
    """Delays that share their hour's lot vary as hours do: of 100 recordings the 90 % intervals of
    the median hold the true one, ln 2, in 82 or more (four standard deviations below 90)."""
    held = 0
    began = np.repeat(np.arange(40), 5) * HOUR + 1.0
    for seed in range(100):
        rng = np.random.default_rng(seed)
        delays = rng.exponential(size=40)[rng.permutation(40)].repeat(5)
        (median,) = Resampling(began, rng).quantiles(delays, (0.5,))
        assert median.interval is not None
        assert median.interval.high is not None
        held += median.interval.low <= math.log(2) <= median.interval.high
    assert held >= 82


def test_drifts_not_caught() -> None:
    resampling = Resampling(np.linspace(0, 40 * HOUR, 100), np.random.default_rng(1))
    delays = np.concatenate([np.arange(88.0), np.full(12, np.inf)])
    median, late = resampling.quantiles(delays, (0.5, 0.9))
    assert median.value == 49.0
    assert late == Quantile(None, None)
    (close,) = resampling.quantiles(np.append(np.arange(91.0), np.full(9, np.inf)), (0.9,))
    assert close.interval is not None
    assert close.interval.high is None
    assert Resampling(np.empty(0), np.random.default_rng(1)).quantiles(np.empty(0), (0.5,)) == [
        Quantile(None, None)
    ]


def test_a_short_recording_is_cut_into_shorter_stretches() -> None:
    resampling = Resampling(np.linspace(0, HOUR, 100), np.random.default_rng(1))
    (median,) = resampling.quantiles(np.arange(100.0), (0.5,))
    assert median.interval is not None
    assert median.interval.low < 49 < (median.interval.high or 0)
