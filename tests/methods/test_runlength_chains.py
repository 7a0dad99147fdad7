"""Expected steps to absorption: closed forms, and digits where solving directly has none left."""

import numpy as np
import pytest

from monitor.methods.runlength.chains import steps_to_absorption


def test_a_single_state_waits_for_one_over_its_chance() -> None:
    assert steps_to_absorption(np.array([[0.75]]), np.array([0.25])) == pytest.approx([4])


def test_a_fair_walk_between_two_ends() -> None:
    """From i of 1 … 9, absorbed at 0 and 10: i(10 − i) steps (gambler's ruin, common knowledge)."""
    moves = 0.5 * (np.eye(9, k=1) + np.eye(9, k=-1))
    absorbed = np.zeros(9)
    absorbed[[0, -1]] = 0.5
    expected = [i * (10 - i) for i in range(1, 10)]
    assert steps_to_absorption(moves, absorbed) == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("chance", [1e-3, 1e-15, 1e-40])
def test_rare_absorption_keeps_its_digits(chance: float) -> None:
    """Twenty states that mix at once, each absorbed with the same chance: 1/chance from any."""
    steps = steps_to_absorption(np.full((20, 20), 1 / 20), np.full(20, chance))
    assert steps == pytest.approx(np.full(20, 1 / chance), rel=1e-12)


def test_no_absorption_is_never() -> None:
    assert np.isinf(steps_to_absorption(np.full((3, 3), 1 / 3), np.zeros(3))).all()
