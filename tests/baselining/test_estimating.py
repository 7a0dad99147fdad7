"""Estimates of streams: which becomes the baseline, and what no change of unit may change."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from streams import assessed, gathered, heads

from monitor.baselining.estimating import estimate
from monitor.baselining.material import StreamSubgroups


def test_each_choice_is_the_estimate_it_names() -> None:
    readings = np.random.default_rng(1).normal(340, 2, (300, 5))
    readings += np.random.default_rng(2).normal(0, 1, (300, 1))
    stream = gathered(readings)

    spreads = estimate([stream]).each[0].spreads
    assert estimate([stream]).common.sigma == spreads.pooled
    assert estimate([stream], "range").common.sigma == spreads.from_ranges
    assert estimate([stream], "sd").common.sigma == spreads.from_sds
    assert estimate([stream]).common.sigma_between == spreads.between_components
    moving = estimate([stream], "pooled", "moving-range").common.sigma_between
    assert moving == spreads.between_moving_range
    assert estimate([stream], "pooled", "none").common.sigma_between == 0


def test_a_slow_drift_does_not_enter_the_moving_range() -> None:
    readings = np.random.default_rng(3).normal(0, 1, (2000, 5))
    drifting = gathered(readings + np.linspace(0, 3, 2000)[:, None])
    spreads = estimate([drifting]).each[0].spreads

    assert spreads.between_components > 0.8
    assert spreads.between_moving_range < 0.15


def test_together_they_are_what_one_stream_would_be() -> None:
    readings = np.random.default_rng(4).normal(340, 2, (1200, 5))
    whole = estimate([gathered(readings)]).common
    parts = estimate(heads(*np.split(readings, 4))).common

    assert parts.mean == pytest.approx(whole.mean)
    assert parts.sigma == pytest.approx(whole.sigma, rel=1e-3)


@settings(max_examples=25, deadline=None)
@given(
    st.integers(0, 2**32 - 1),
    st.sampled_from([1, 2, 5]),
    st.floats(-1e4, 1e4),
    st.sampled_from([1e-3, 0.5, 28.35, 1e4]),
)
def test_another_unit_changes_nothing_but_the_unit(
    seed: int, size: int, offset: float, scale: float
) -> None:
    readings = np.random.default_rng(seed).normal(0, 1, (200, size))
    one = assessed(gathered(readings), scheme=None)
    other = assessed(gathered(offset + scale * readings), scheme=None)

    assert [reason.kind for reason in other.reasons] == [reason.kind for reason in one.reasons]
    before, after = one.estimate.common, other.estimate.common
    close = 1e-6 * (1 + abs(offset) / scale)
    assert (after.mean - offset) / scale == pytest.approx(before.mean, abs=close)
    assert after.sigma / scale == pytest.approx(before.sigma, rel=close)
    assert after.error(size) / scale == pytest.approx(before.error(size), rel=close)


def test_what_is_left_out_breaks_what_was_in_a_row() -> None:
    stream = gathered(np.arange(12.0).reshape(6, 2))
    kept = stream.keeping(np.array([True, True, False, True, True, False]))

    assert isinstance(kept, StreamSubgroups)
    assert kept.broken.tolist() == [True, False, True, False]
    assert kept.mean.tolist() == [0.5, 2.5, 6.5, 8.5]
