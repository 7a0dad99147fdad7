"""The wander guard, against variance ratios known in closed form."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.methods.wander import variance_ratio
from replay.tuning.array_ewma import recurrence
from replay.tuning.wandering import first_lag, wander


def autoregression(phi: float, count: int, seed: int = 1) -> np.ndarray:
    noise = np.random.default_rng(seed).normal(size=count) * np.sqrt(1 - phi**2)
    return recurrence(phi, noise)


@pytest.mark.parametrize("phi", [0.0, 0.5, 0.8])
def test_ratio_of_an_autoregression(phi: float) -> None:
    """VR(m) = (1+φ)/(1−φ) − 2φ(1−φᵐ)/(m(1−φ)²), from the sum of its autocorrelations."""
    streams = [autoregression(phi, 100_000, seed) for seed in (1, 2, 3)]
    for m in (1, 10, 50, 200):
        exact = (1 + phi) / (1 - phi) - 2 * phi * (1 - phi**m) / (m * (1 - phi) ** 2)
        assert variance_ratio(streams, m)[0] == pytest.approx(exact, rel=0.1)
    assert first_lag(streams) == pytest.approx(phi, abs=0.01)
    assert not wander(streams).wanders


@pytest.mark.parametrize("seed", range(5))
def test_what_wanders(seed: int) -> None:
    rng = np.random.default_rng(seed)
    steady = rng.normal(size=20_000)
    assert not wander([steady]).wanders
    assert wander([steady + 0.01 * np.cumsum(rng.normal(size=20_000))]).wanders
    slow = 0.5 * np.sin(np.arange(20_000) / 1_500)
    assert wander([steady + slow]).wanders


def test_streams_at_different_centres_do_not_wander() -> None:
    rng = np.random.default_rng(1)
    assert not wander([rng.normal(at, 1, 10_000) for at in (0, 5, -3)]).wanders


def test_too_short_to_tell() -> None:
    found = wander([np.random.default_rng(1).normal(size=1_500)])
    assert found.growth is None
    assert not found.wanders
    assert found.lengths[-1] == 100
    assert wander([np.empty(0)]).lengths == ()
