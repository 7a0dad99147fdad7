"""Tails fitted to peaks, against distributions whose tails are known."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate, stats

from replay.readings import Values
from replay.tuning import tails
from replay.tuning.tails import PooledPeaks, TailFit


def apart(levels: Values, subgroups: int) -> PooledPeaks:
    return PooledPeaks(levels, np.arange(len(levels)) * 1_000, subgroups)


def fitted(levels: Values, subgroups: int, weight: float | None = None) -> TailFit:
    found = tails.fit(apart(levels, subgroups), weight, usual=weight)
    assert found is not None
    return found


def test_an_exponential_tail_is_carried_on() -> None:
    rng = np.random.default_rng(2)
    found = fitted(rng.exponential(2.0, 50_000), 200_000)
    assert found.exponential
    # One subgroup in four has a peak: P(peak > h)/4 = 1/T.
    for interval in (1e4, 1e6, 1e7):
        exact = 2.0 * math.log(interval / 4)
        assert found.level(interval) == pytest.approx(exact, rel=0.1)
        assert found.interval(found.level(interval)) == pytest.approx(interval, rel=1e-6)


@pytest.mark.parametrize(("interval", "subgroups"), [(2e6, 80_000), (1e5, 40_000)])
def test_the_factor_is_that_of_a_hundred_excesses(interval: float, subgroups: int) -> None:
    """exp(1.645 √((1 + ln²(100 T/N))/100)): the delta method on the rate at the 100th largest peak
    and on the mean of 100 exponential excesses; to the power 1.1 for the form of the tail."""
    levels = np.random.default_rng(1).exponential(size=20_000)
    expected = (
        math.exp(1.645 * math.sqrt((1 + math.log(100 * interval / subgroups) ** 2) / 100)) ** 1.1
    )
    assert fitted(levels, subgroups).factor(interval) == pytest.approx(expected, rel=1e-3)


def test_peaks_that_come_together_count_once() -> None:
    rng = np.random.default_rng(1)
    levels = np.repeat(rng.exponential(size=5_000), 4)
    places = np.repeat(np.arange(5_000) * 1_000, 4) + np.tile(np.arange(4), 5_000)
    found = tails.fit(PooledPeaks(levels, places, 50_000), None)
    assert found is not None
    assert found.independent == pytest.approx(25, abs=1)
    assert found.factor(1e6) > fitted(levels, 50_000).factor(1e6) ** 1.8


def test_single_normal_points_are_carried_on() -> None:
    """In g the two-sided normal tail (by scipy) falls evenly: from 3.3 to 5.5 within 3 %."""
    points = [tails.scale_of(h, 1.0) for h in (3.3, 4.4, 5.5)]
    exact = [-float(stats.norm.logsf(h)) for h in (3.3, 4.4, 5.5)]
    assert np.diff(points) == pytest.approx(np.diff(exact), rel=0.03)
    values = np.abs(np.random.default_rng(4).normal(size=100_000))
    found = fitted(values, 100_000, 1.0)
    assert found.level(2e6) == pytest.approx(float(stats.norm.isf(0.25e-6)), rel=0.05)


def test_heavy_points_and_odd_tails_are_not_carried_on() -> None:
    rng = np.random.default_rng(3)
    heavy = np.abs(rng.standard_t(4, size=50_000))
    assert not fitted(heavy, 50_000, 1.0).exponential
    assert not fitted(rng.pareto(2.0, 50_000), 50_000).exponential
    assert not fitted(np.concatenate([rng.random(50_000), np.full(90, 5.0)]), 50_000).exponential


def test_short_intervals_come_from_the_peaks_themselves() -> None:
    levels = np.arange(1.0, 2_001.0)
    found = fitted(levels, 10_000)
    # 500 peaks lie above 1500: one in 20 subgroups.
    assert found.interval(1_500.0) == 20
    assert found.level(20) == pytest.approx(1_500.5)


def test_too_few_peaks_give_no_tail() -> None:
    assert tails.fit(apart(np.arange(99.0), 1_000), None) is None
    assert fitted(np.arange(100.0), 1_000).above == 25
    assert fitted(np.arange(400.0), 1_000).above == 40
    assert tails.fit(apart(np.ones(5_000), 10_000), None) is None


@pytest.mark.parametrize(("k", "ratio", "size"), [(1.46, 1.0, 5), (1.46, 1.2, 5), (1.9, 1.0, 3)])
def test_how_fast_a_sum_of_normal_variances_falls_off(k: float, ratio: float, size: int) -> None:
    """scipy's chi-square as the reference: with θ = 1/scale, exp(θ(s²/σ² − k)) has mean 1."""
    scale = tails.of_variances(k, ratio, size)
    assert scale is not None
    variance = stats.chi2(size - 1, scale=ratio / (size - 1))
    mean, _ = integrate.quad(lambda x: np.exp((x - k) / scale + variance.logpdf(x)), 0, np.inf)
    assert mean == pytest.approx(1.0, rel=1e-4)


def test_where_a_sum_of_variances_has_no_usual_tail() -> None:
    assert tails.of_variances(1.46, 1.5, 5) is None
    assert tails.of_variances(1.46, 1.0, 1) is None
    assert tails.of_variances(1.46, 0.0, 5) is None
    assert tails.of_variances(1.46, np.nan, 5) is None


def test_peaks_of_several_streams_lie_far_apart() -> None:
    found = tails.pooled(
        [np.array([1.0]), np.array([2.0])], [np.array([99]), np.array([0])], [100, 100], 200
    )
    assert found.level.tolist() == [1.0, 2.0]
    assert np.diff(found.place) > 100
