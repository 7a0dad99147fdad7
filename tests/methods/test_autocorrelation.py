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
    found = autocorrelation.inflation(autocorrelation.correlations([values], 200), len(values))

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
    assert autocorrelation.inflation(flat, 50) == 1
