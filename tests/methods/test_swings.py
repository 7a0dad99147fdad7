"""Whether slow swings stand out, against exact chances and processes of which it is known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from streams import following

from monitor.methods.swings import LEAST, QUICK, SLOW, swings


def exact_chance(growth: float) -> float:
    """P(Σwⱼeⱼ ≥ growth·q), the powers e exponential and q their mean over the quick swings: a
    weighted sum of exponentials is hypoexponential (W. Feller 1971, volume II, section I.13), and
    E exp(−tq) = (1 + t/m)⁻ᵐ."""
    weights = 1 / np.arange(1, SLOW + 1) ** 2
    weights /= weights.sum()
    count = QUICK - SLOW
    return sum(
        float(np.prod([own / (own - other) for other in weights if other != own]))
        * (1 + growth / (own * count)) ** -count
        for own in weights
    )


@pytest.mark.parametrize("seed", range(6))
def test_the_chance_of_one_series_is_the_exact_one(seed: int) -> None:
    found = swings([np.random.default_rng(seed).normal(size=300)])

    assert found is not None
    exact = exact_chance(found.growth)
    assert found.p == pytest.approx(exact, abs=4 * np.sqrt(exact * (1 - exact) / 20_000))


@pytest.mark.parametrize(("streams", "count"), [(1, 400), (6, 150)])
def test_the_chance_is_uniform_where_nothing_wanders(streams: int, count: int) -> None:
    chance = np.random.default_rng(1)
    found = [swings(list(chance.normal(size=(streams, count)))) for _ in range(300)]

    assert stats.kstest([each.p for each in found if each], "uniform").pvalue > 1e-3


@pytest.mark.parametrize("correlation", [0.0, 0.5, 0.8])
@pytest.mark.parametrize("count", [200, 500, 1000])
def test_values_that_follow_each_other_for_a_while_pass(count: int, correlation: float) -> None:
    chance = np.random.default_rng(2)
    found = [swings([following(chance, correlation, count)[:, 0]]) for _ in range(200)]

    assert sum(bool(each and each.p < 0.01) for each in found) <= 8  # 2 are to be expected


@pytest.mark.parametrize(
    ("count", "step", "least"), [(200, 0.1, 0.6), (300, 0.1, 0.8), (500, 0.05, 0.7)]
)
def test_a_walk_beside_noise_is_seen(count: int, step: float, least: float) -> None:
    """``step``: the walk's, in standard errors of a subgroup mean."""
    chance = np.random.default_rng(3)
    walks = chance.normal(size=(100, count)) + step * np.cumsum(
        chance.normal(size=(100, count)), axis=1
    )
    found = [swings([walk]) for walk in walks]

    assert np.mean([each is not None and each.p < 0.01 for each in found]) > least


def test_streams_are_seen_together_each_about_its_own_mean() -> None:
    chance = np.random.default_rng(4)
    heads = chance.normal(size=(6, 200)) + 10 * np.arange(6)[:, None]
    still = swings(list(heads))
    drifting = swings(list(heads + np.linspace(0, 0.7, 200)))

    assert still is not None
    assert drifting is not None
    assert still.p > 0.02
    assert drifting.p < 0.001


def test_the_unit_does_not_matter() -> None:
    values = np.random.default_rng(5).normal(size=250)
    one, other = swings([values]), swings([341.2 + 1.9 * values])

    assert one is not None
    assert other is not None
    assert one.growth == pytest.approx(other.growth)


def test_too_short_or_still_tells_nothing() -> None:
    assert swings([np.random.default_rng(6).normal(size=LEAST - 1)]) is None
    assert swings([np.ones(LEAST)]) is None
    assert swings([]) is None
