"""Subgroups outside: found where one was put, and hardly ever elsewhere."""

from __future__ import annotations

import numpy as np
import pytest
from plans import START
from scipy import stats
from streams import MINUTE, gathered

from monitor.baselining.estimating import Values, estimate
from monitor.baselining.outside import CHANCE, outside

KNOWN = {(): Values(340.0, 2.0, 0.0)}


def test_one_mean_and_one_spread_are_found_where_they_are() -> None:
    readings = np.random.default_rng(5).normal(340, 2, (1000, 5))
    readings[100] += 6
    readings[700] = 340 + np.array([-9, 0, 0, 0, 9.0])
    found = outside([gathered(readings)], KNOWN)

    assert [(point.time, point.what) for point in found.points] == [
        (START + 101 * MINUTE, "mean"),
        (START + 701 * MINUTE, "spread"),
    ]
    assert np.flatnonzero(found.flags[0]).tolist() == [100, 700]


def test_limits_are_the_exact_quantiles() -> None:
    readings = np.random.default_rng(9).normal(340, 2, (50, 5))
    readings[3] += 100  # far off, but no wider than the others
    readings[4] = 340 + np.array([-90.0, 90, 0, 0, 0])
    found = outside([gathered(readings)], KNOWN)

    tail = CHANCE / (4 * 50)
    limit = {point.what: point.limit for point in found.points}
    assert limit["mean"] == pytest.approx(340 + stats.norm.isf(tail) * 2 / 5**0.5, rel=1e-9)
    assert limit["spread"] == pytest.approx(2 * (stats.chi2.isf(tail, 4) / 4) ** 0.5, rel=1e-9)


def test_strangers_do_not_hide_each_other() -> None:
    """Where wild ones have widened the baseline, limits go by the middle half."""
    readings = np.random.default_rng(10).normal(340, 2, (2000, 5))
    readings[::50] -= 40
    readings[25::50] = 340 + 30 * (readings[25::50] - 340)
    stream = gathered(readings)
    own = estimate([stream]).common
    found = outside([stream], {(): own})

    assert own.sigma > 8
    assert own.sigma_between > 4
    wild = set(range(0, 2000, 50)) | set(range(25, 2000, 50))
    assert set(np.flatnonzero(found.flags[0]).tolist()) == wild


def test_innocent_streams_hardly_ever_have_one() -> None:
    chance = np.random.default_rng(6)
    listed = sum(
        bool(outside([gathered(chance.normal(340, 2, (500, 5)))], KNOWN).points) for _ in range(200)
    )

    assert listed <= stats.binom.isf(1e-4, 200, CHANCE)


def test_sigma_between_widens_the_limits_of_means_alone() -> None:
    chance = np.random.default_rng(7)
    readings = chance.normal(340, 2, (400, 5))
    readings[10] += 6
    assert outside([gathered(readings)], KNOWN).points
    moving = gathered(readings + chance.normal(0, 2, (400, 1)))

    assert not outside([moving], {(): Values(340.0, 2.0, 2.0)}).points


def test_readings_that_round_to_one_value_are_no_narrow_spread() -> None:
    readings = np.round(np.random.default_rng(8).normal(340.3, 2, (3000, 5)))
    readings[7] = 340.0

    assert {p.what for p in outside([gathered(readings)], KNOWN).points} == {"spread"}
    assert not outside([gathered(readings)], KNOWN, step=1.0).points
