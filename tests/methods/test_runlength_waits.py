"""Quantiles of run lengths: by distributions known in closed form, and by simulation."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.methods.runlength.waits import chain, either_until, geometric_until


@given(st.floats(1.5, 1e9), st.floats(0.01, 0.99))
def test_a_geometric_wait(average: float, probability: float) -> None:
    assert geometric_until(average, probability) == stats.geom.ppf(probability, 1 / average)


def test_waits_without_end_and_without_delay() -> None:
    assert geometric_until(math.inf, 0.5) == math.inf
    assert geometric_until(1.0, 0.9) == 1
    with pytest.raises(ValueError, match="too rare"):
        either_until([itertools.repeat(1.0)], 0.5)


def test_a_long_way_to_go_is_no_wait_without_end() -> None:
    """So many successes that there is no sign of an end for the first hundred steps."""
    many, chance = 120, 0.3
    moves = np.diag(np.full(many, 1 - chance)) + np.diag(np.full(many - 1, chance), 1)
    found = either_until([chain(np.eye(many)[0], moves)], 0.5)
    assert found == pytest.approx(stats.nbinom.ppf(0.5, many, chance) + many, abs=1)


@given(st.floats(1e-7, 0.4), st.floats(0.01, 0.99))
def test_a_chain_of_one_state_is_geometric(chance: float, probability: float) -> None:
    wait = chain(np.ones(1), np.array([[1 - chance]]))
    found = either_until([wait], probability)
    assert found == pytest.approx(stats.geom.ppf(probability, chance), abs=1, rel=1e-5)


@given(st.integers(1, 6), st.floats(0.05, 0.9), st.floats(0.01, 0.99))
def test_a_chain_in_a_row_waits_for_so_many_successes(
    many: int, chance: float, probability: float
) -> None:
    """The negative binomial distribution."""
    moves = np.diag(np.full(many, 1 - chance)) + np.diag(np.full(many - 1, chance), 1)
    found = either_until([chain(np.eye(many)[0], moves)], probability)
    expected = stats.nbinom.ppf(probability, many, chance) + many
    assert found == pytest.approx(expected, abs=1)


def test_of_two_waits_the_first_to_end_counts() -> None:
    waits = [(0.9**n for n in itertools.count(1)), (0.8**n for n in itertools.count(1))]
    assert either_until(waits, 0.5) == stats.geom.ppf(0.5, 1 - 0.9 * 0.8)
