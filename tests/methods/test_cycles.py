"""Sources that take turns: found where they differ, and only there."""

from __future__ import annotations

import numpy as np
import pytest
from streams import following

from monitor.methods.cycles import cycle


@pytest.mark.parametrize("length", [2, 3, 6, 12, 24])
def test_one_source_that_is_off_is_found_by_its_turn(length: int) -> None:
    values = np.random.default_rng(length).normal(size=60_000)
    values[1::length] += 1.5
    found = cycle([values])

    assert found is not None
    assert found.length == length
    between = 1.5**2 * (1 / length) * (1 - 1 / length)
    assert found.share == pytest.approx(between / (1 + between), rel=0.15)


def test_it_is_found_although_a_turn_is_missed_now_and_then() -> None:
    chance = np.random.default_rng(1)
    values = chance.normal(size=60_000)
    values[::6] += 1.0
    found = cycle([np.delete(values, chance.integers(0, 60_000, 60))])

    assert found is not None
    assert found.length == 6


@pytest.mark.parametrize("correlation", [0.0, 0.5, 0.95])
def test_what_only_follows_takes_no_turns(correlation: float) -> None:
    chance = np.random.default_rng(2)

    assert all(cycle([following(chance, correlation, 20_000)[:, 0]]) is None for _ in range(3))


def test_too_few_readings_show_none() -> None:
    assert cycle([np.arange(50.0)]) is None
    assert cycle([np.ones(10_000)]) is None
