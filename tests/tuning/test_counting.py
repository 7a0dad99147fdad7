"""Intervals between false alarms from counts, against the Poisson limits of scipy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from replay.tuning.counting import between


@pytest.mark.parametrize("alarms", [1, 2, 5, 40, 200, 201, 3_000])
def test_poisson_limits(alarms: int) -> None:
    """F. Garwood 1936: χ² quantiles over 2, here by scipy; above 200 within a thousandth."""
    found = between(alarms, 1_000.0)
    assert found is not None
    high = stats.chi2.ppf(0.95, 2 * alarms + 2) / 2
    low = stats.chi2.ppf(0.05, 2 * alarms) / 2
    assert found.low == pytest.approx(1_000 / high, rel=1e-3)
    assert found.high == pytest.approx(1_000 / low, rel=1e-3)


def test_none_seen_leaves_a_third_of_the_time() -> None:
    found = between(0, 3_000.0)
    assert found is not None
    assert (found.low, found.high) == (1_000.0, None)
    assert stats.poisson.pmf(0, 3.0) == pytest.approx(0.05, abs=3e-4)
    assert between(0, 0.0) is None


def test_swarms_widen_the_interval() -> None:
    even = np.linspace(0, 999, 40)
    swarm = np.concatenate([np.full(20, 100.0), np.full(20, 600.0)])
    plain, evenly, swarming = (between(40, 1_000.0, m) for m in (None, even, swarm))
    assert plain is not None
    assert swarming is not None
    assert swarming.high is not None
    assert plain.high is not None
    assert evenly == plain
    assert swarming.low < plain.low < 25 < plain.high < swarming.high
