"""Standstills put into readings, and long runs that come about with nothing wrong."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from streams import following

from monitor.methods.normal import Array
from monitor.methods.standstill import standstill


def readings(correlation: float, step: float, count: int = 10_000, seed: int = 1) -> Array:
    """Of a gauge with such a step, in standard deviations."""
    values = following(np.random.default_rng(seed), correlation, count)[:, 0]
    return np.asarray(np.round(values / step))


@pytest.mark.parametrize("correlation", [0.0, 0.5, 0.9])
@pytest.mark.parametrize("step", [0.001, 0.05, 0.5])
def test_a_gauge_that_stood_still_is_found(correlation: float, step: float) -> None:
    values = readings(correlation, step)
    values[3000:3200] = values[3000]
    found = standstill(values)

    assert found is not None
    assert abs(found.start - 3000) <= 2
    assert abs(found.length - 200) <= 3
    assert (found.runs, found.values) == (1, found.length)


@pytest.mark.parametrize("runs", [2, 5])
@pytest.mark.parametrize("seed", range(10))
def test_several_do_not_hide_each_other(runs: int, seed: int) -> None:
    """On a gauge so fine that a value it stood still at is met by itself now and then as well."""
    values = readings(0.0, 0.005, 20_000, seed)
    for start in range(1_000, 1_000 + 3_000 * runs, 3_000):
        values[start : start + 600] = values[start]
    found = standstill(values)
    assert found is not None
    assert found.runs == runs
    assert found.values >= 600 * runs


@pytest.mark.parametrize("correlation", [0.0, 0.5, 0.9, 0.99])
@pytest.mark.parametrize("step", [0.001, 0.3, 1.0, 2.5])
def test_runs_of_a_coarse_gauge_are_no_standstill(correlation: float, step: float) -> None:
    assert not any(standstill(readings(correlation, step, seed=seed)) for seed in range(12))


@given(st.integers(0, 9_700), st.integers(60, 300))
def test_wherever_it_stood_still(start: int, length: int) -> None:
    values = readings(0.0, 0.05)
    values[start : start + length] = 1e3
    found = standstill(values)

    assert found is not None
    assert (found.start, found.length) == (start, length)


def test_all_of_several_are_counted() -> None:
    values = readings(0.0, 0.05)
    values[1000:1100] = 3
    values[5000:5300] = 50
    found = standstill(values)

    assert found is not None
    assert (found.start, found.length, found.runs) == (5000, 300, 2)
    assert abs(found.values - 400) <= 1


@pytest.mark.parametrize("values", [[], [1.0] * 500, [1.0, 2.0] * 10, [1.0] * 400 + [2.0] * 400])
def test_where_nothing_tells_how_long_runs_are_none_is_said(values: list[float]) -> None:
    assert standstill(np.array(values)) is None
