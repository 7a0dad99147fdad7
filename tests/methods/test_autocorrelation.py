"""Autocorrelation and what it makes of a count, against definitions and known processes."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from streams import following

from monitor.methods import autocorrelation


def test_it_is_the_definition() -> None:
    values = np.random.default_rng(1).normal(size=300)
    deviation = values - values.mean()
    expected = [float(deviation[: 300 - k] @ deviation[k:]) for k in range(11)]
    found = autocorrelation.correlations([values], 10)

    np.testing.assert_allclose(found, np.array(expected) / expected[0], atol=1e-12)


def test_several_series_are_pooled_each_about_its_own_mean() -> None:
    chance = np.random.default_rng(2)
    one, two = following(chance, 0.6, 4000)[:, 0], following(chance, 0.6, 9000)[:, 0] + 100
    found = autocorrelation.correlations([one, two, np.array([1.0])], 3)

    np.testing.assert_allclose(found, [1, 0.6, 0.36, 0.216], atol=0.05)


@pytest.mark.parametrize("correlation", [0.2, 0.5, 0.9])
def test_the_inflation_of_a_long_mean_is_that_of_theory(correlation: float) -> None:
    values = following(np.random.default_rng(3), correlation, 100_000)[:, 0]
    memory = autocorrelation.memory(autocorrelation.correlations([values], 200), len(values))
    found = autocorrelation.inflation(memory)

    assert found == pytest.approx((1 + correlation) / (1 - correlation), rel=0.08)


def test_independent_values_pass_as_such_as_often_as_they_should() -> None:
    chance = np.random.default_rng(4)
    doubts = [
        autocorrelation.independence_p(
            autocorrelation.correlations([chance.normal(size=500)], 10), 500
        )
        for _ in range(300)
    ]

    assert stats.kstest(doubts, "uniform").pvalue > 1e-3


def test_values_that_do_not_vary_follow_nothing() -> None:
    flat = autocorrelation.correlations([np.ones(50)], 10)

    assert autocorrelation.independence_p(flat, 50) == 1
    assert autocorrelation.memory(flat, 50).tolist() == [1]


@pytest.mark.parametrize("correlation", [0.3, 0.9])
def test_what_is_kept_ends_and_its_pairs_never_rise(correlation: float) -> None:
    values = following(np.random.default_rng(5), correlation, 3000)[:, 0]
    memory = autocorrelation.memory(autocorrelation.correlations([values], 200), 3000)
    pairs = memory.reshape(-1, 2).sum(axis=1)

    assert memory[0] == 1
    assert len(memory) < 100
    assert (np.diff(pairs) <= 1e-12).all()
    assert (pairs[1:] > 0).all()


@pytest.mark.parametrize("lam", [0.05, 0.2, 1.0])
def test_an_average_widens_as_theory_says(lam: float) -> None:
    """Of AR(1): Σ over lags of (φ(1 − λ))ʲ is a geometric series."""
    memory = 0.6 ** np.arange(200)
    ratio = 0.6 * (1 - lam)

    expected = (1 + ratio) / (1 - ratio)
    assert autocorrelation.averaged(memory, lam) == pytest.approx(expected)


def test_means_of_m_widen_as_theory_says() -> None:
    """Of AR(1), as in the test of variance ratios; of a moving mean of 5, by its definition."""
    phi, m = 0.8, np.arange(1, 301)
    exact = (1 + phi) / (1 - phi) - 2 * phi * (1 - phi**m) / (m * (1 - phi) ** 2)
    np.testing.assert_allclose(autocorrelation.inflations(phi ** np.arange(400), 300), exact)

    moving = autocorrelation.inflations(1 - np.arange(5) / 5, 300)
    np.testing.assert_allclose(moving[[0, 1, 9]], [1, 1.8, 1 + 2 * (2 - 4 / 10)])
    assert moving[-1] == pytest.approx(5, abs=0.05)


def test_series_alike_have_these_correlations() -> None:
    memory = 0.4 * 0.9 ** np.arange(100)
    memory[0] = 1
    series = autocorrelation.alike(memory, 1024, 400, np.random.default_rng(6))

    assert series.shape == (1024, 400)
    assert series.var() == pytest.approx(1, rel=0.03)
    lags = (1, 5, 20)
    found = [float((series[lag:] * series[:-lag]).mean()) for lag in lags]
    np.testing.assert_allclose(found, memory[list(lags)], atol=0.01)
