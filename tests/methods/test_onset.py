"""Onset of a shift: exact on series without noise, and its stated confidence at real signals."""

import math
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.methods.onset import LOOK_BACK, estimate

values = st.lists(st.floats(-8, 8, width=32), min_size=1, max_size=LOOK_BACK)


def test_a_clean_step_is_found_where_it_is() -> None:
    onset = estimate([0.0] * 40 + [2.0] * 12)
    assert (onset.index, onset.size) == (40, 2.0)
    assert onset.first is not None
    assert onset.first <= 40 <= onset.last


def test_a_shift_older_than_the_series_has_no_first() -> None:
    onset = estimate([-1.5] * LOOK_BACK)
    assert onset.index == 0
    assert onset.first is None
    assert onset.size == -1.5


def test_direction_leaves_out_the_larger_opposite_shift() -> None:
    series = [0.0] * 20 + [-3.0] * 10 + [1.5] * 6
    assert estimate(series, +1).index == 30
    assert estimate(series, +1).size == 1.5
    assert estimate(series, -1).size < 0


def test_one_value_is_a_series() -> None:
    onset = estimate([4.0])
    assert (onset.index, onset.first, onset.last, onset.size) == (0, None, 0, 4.0)


def test_an_empty_series_has_no_onset() -> None:
    with pytest.raises(ValueError):
        estimate([])


@given(values)
def test_the_interval_holds_the_estimate_and_stays_inside(z: list[float]) -> None:
    onset = estimate(z)
    assert (0 if onset.first is None else onset.first) <= onset.index <= onset.last < len(z)
    assert onset.first != 0


@given(values)
def test_turning_the_series_over_turns_only_the_size(z: list[float]) -> None:
    up, down = estimate(z, +1), estimate([-x for x in z], -1)
    assert (up.index, up.first, up.last, up.size) == (down.index, down.first, down.last, -down.size)


def cusum(z: np.ndarray) -> int | None:
    upper = 0.0
    for i, x in enumerate(z.tolist()):
        upper = max(0.0, upper + x - 0.5)
        if upper > 5:
            return i
    return None


def ewma(z: np.ndarray) -> int | None:
    value = variance = 0.0
    for i, x in enumerate(z.tolist()):
        value += 0.2 * (x - value)
        variance = 0.04 + 0.64 * variance
        if value > 2.962 * math.sqrt(variance):
            return i
    return None


def shewhart(z: np.ndarray) -> int | None:
    beyond = np.flatnonzero(z > 3)
    return int(beyond[0]) if beyond.size else None


@pytest.mark.parametrize("shift", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("signal", [cusum, ewma, shewhart])
def test_the_interval_holds_the_true_onset_nine_times_in_ten(
    signal: Callable[[np.ndarray], int | None], shift: float
) -> None:
    """600 runs each; the standard error of a coverage of 0.9 is 0.012."""
    rng = np.random.default_rng([int(10 * shift), len(signal.__name__)])
    quiet, runs, held = 80, 600, 0
    for _ in range(runs):
        at = None
        while at is None or at < quiet:  # a false alarm before the shift is another story
            z = rng.standard_normal(quiet + 1500)
            z[quiet:] += shift
            at = signal(z)
        start = max(0, at + 1 - LOOK_BACK)
        onset = estimate(z[start : at + 1], +1)
        first = 0 if onset.first is None else onset.first
        # A shift from before the series is held by the open end alone.
        held += first <= max(quiet - start, 0) <= onset.last
    assert 0.85 <= held / runs <= 0.96
