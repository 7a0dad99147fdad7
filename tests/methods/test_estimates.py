"""Estimates of spread, against scipy, against their definitions, and for what they estimate."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from monitor.methods import estimates
from monitor.methods.constants import c4, d2

Readings = np.ndarray[tuple[int, int], np.dtype[np.float64]]


def of(rows: list[Readings]) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:  # type: ignore[type-arg]
    """n, mean, variance and range of each subgroup."""
    return (
        np.array([len(row) for row in rows]),
        np.array([row.mean() for row in rows]),
        np.array([row.var(ddof=1) if len(row) > 1 else np.nan for row in rows]),
        np.array([np.ptp(row) if len(row) > 1 else np.nan for row in rows]),
    )


@pytest.fixture
def uneven() -> list[Readings]:
    chance = np.random.default_rng(1)
    sizes = chance.integers(1, 9, 40_000)
    return np.split(chance.normal(340, 2, sizes.sum()), np.cumsum(sizes)[:-1])


def test_with_equal_sizes_they_are_the_textbook_ratios() -> None:
    rows = list(np.random.default_rng(2).normal(0, 3, (50, 5)))
    n, _, variance, ranges = of(rows)

    assert estimates.sigma_from_ranges(n, ranges) == pytest.approx(ranges.mean() / d2(5))
    assert estimates.sigma_from_sds(n, variance) == pytest.approx(np.sqrt(variance).mean() / c4(5))
    pooled = math.sqrt(variance.mean()) / c4(201)
    assert estimates.pooled_sigma(n, variance) == pytest.approx(pooled)


def test_with_sizes_that_differ_each_finds_sigma(uneven: list[Readings]) -> None:
    n, mean, variance, ranges = of(uneven)

    for found in (
        estimates.pooled_sigma(n, variance),
        estimates.sigma_from_ranges(n, ranges),
        estimates.sigma_from_sds(n, variance),
        estimates.total_sigma(n, mean, variance),
    ):
        assert found == pytest.approx(2, rel=0.01)


def test_the_total_is_that_of_all_readings(uneven: list[Readings]) -> None:
    n, mean, variance, _ = of(uneven[:200])

    alone = np.concatenate(uneven[:200]).std(ddof=1)
    assert estimates.total_sigma(n, mean, variance) == pytest.approx(alone)


def test_single_readings_know_nothing_within() -> None:
    n, mean, variance, ranges = of([np.array([value]) for value in (1.0, 2.0, 4.0)])

    assert math.isnan(estimates.pooled_sigma(n, variance))
    assert math.isnan(estimates.sigma_from_ranges(n, ranges))
    assert math.isnan(estimates.sigma_from_sds(n, variance))
    assert estimates.components(n, mean, variance) is None


def test_f_is_that_of_scipy(uneven: list[Readings]) -> None:
    rows = [row for row in uneven[:60] if len(row) > 1]
    n, mean, variance, _ = of(rows)
    found = estimates.components(n, mean, variance)

    assert found is not None
    assert found.ratio == pytest.approx(stats.f_oneway(*rows).statistic)


def test_variance_between_is_found(uneven: list[Readings]) -> None:
    chance = np.random.default_rng(3)
    n, mean, variance, _ = of([row + chance.normal(0, 0.8) for row in uneven])
    found = estimates.components(n, mean, variance)

    assert found is not None
    assert found.sigma_between == pytest.approx(0.8, rel=0.03)
    assert found.within == pytest.approx(4, rel=0.02)


def test_where_nothing_acts_between_it_is_not_negative() -> None:
    rows = list(np.array([[1.0, -1.0], [-1.0, 1.0], [1.0, -1.0]]))
    n, mean, variance, _ = of(rows)
    found = estimates.components(n, mean, variance)

    assert found is not None
    assert found.sigma_between == 0


def test_moving_ranges_find_sigma_although_the_centre_moves() -> None:
    chance = np.random.default_rng(4)
    values = chance.normal(0, 2, 40_000) + np.linspace(0, 100, 40_000)
    unbroken = np.zeros(len(values), np.bool_)

    assert estimates.moving_range_sigma(values, unbroken) == pytest.approx(2, rel=0.02)
    assert estimates.median_moving_range_sigma(values, unbroken) == pytest.approx(2, rel=0.02)


def test_no_moving_range_spans_a_break() -> None:
    values = np.array([1.0, 2.0, 100.0, 103.0])
    broken = np.array([True, False, True, False])

    assert estimates.moving_range_sigma(values, broken) == pytest.approx(2 / d2(2))
    assert math.isnan(estimates.moving_range_sigma(values[:1], broken[:1]))
