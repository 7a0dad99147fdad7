"""Whether means keep to a centre, on processes of which it is known."""

from __future__ import annotations

import numpy as np
import pytest
from streams import following

from monitor.methods.wander import variance_ratio, wander


def test_the_ratio_of_independent_values_is_one() -> None:
    series = list(np.random.default_rng(1).normal(5, 2, (4, 20_000)))
    ratio, freedom = variance_ratio(series, 50)

    assert freedom == 4 * 399
    assert ratio == pytest.approx(1, abs=0.1)


def test_the_ratio_levels_off_at_the_inflation_of_values_that_follow_each_other() -> None:
    values = following(np.random.default_rng(2), 0.5, 200_000)[:, 0]

    assert variance_ratio([values], 200)[0] == pytest.approx(3, rel=0.15)


@pytest.mark.parametrize("correlation", [0.0, 0.3, 0.8])
def test_what_levels_off_does_not_wander(correlation: float) -> None:
    chance = np.random.default_rng(3)
    verdicts = [wander([following(chance, correlation, 6000)[:, 0]]) for _ in range(40)]

    assert sum(bool(each and each.wanders) for each in verdicts) <= 2


@pytest.mark.parametrize(("count", "step"), [(1000, 0.2), (6000, 0.05)])
def test_a_walk_wanders(count: int, step: float) -> None:
    chance = np.random.default_rng(4)
    sure = 0
    for _ in range(10):
        walk = chance.normal(size=count) + np.cumsum(chance.normal(size=count)) * step
        found = wander([walk])
        assert found is not None
        assert found.may_wander
        sure += found.wanders
    assert sure >= 8


def test_streams_have_centres_of_their_own() -> None:
    series = list(np.random.default_rng(5).normal(size=(6, 2000)) + np.arange(6)[:, None] * 10)
    found = wander(series)

    assert found is not None
    assert not found.wanders
    assert (found.by, found.short, found.long) == ("stretches", 50, 200)


def test_short_series_are_judged_by_their_swings() -> None:
    values = np.random.default_rng(7).normal(size=2_400)
    long, short = wander([values]), wander([values[:2_399]])

    assert long is not None
    assert long.by == "stretches"
    assert short is not None
    assert (short.by, short.short, short.long) == ("swings", 99, 399)


def test_many_short_streams_tell_together() -> None:
    chance = np.random.default_rng(8)
    series = list(chance.normal(size=(100, 100)) + np.linspace(0, 0.8, 100))
    found = wander(series)

    assert found is not None
    assert found.wanders


def test_too_few_cannot_tell() -> None:
    assert wander([np.random.default_rng(6).normal(size=99)]) is None
    assert wander([]) is None
    assert variance_ratio([np.ones(5)], 5) == (0.0, 0)
