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


def random_walk(n: int, up: float) -> np.ndarray:
    return up * np.eye(n, k=1) + (1 - up) * np.eye(n, k=-1)


@pytest.mark.parametrize("n", [1, 23, 24, 25, 48, 49, 50, 200])
def test_a_long_walk_that_leaves_at_both_ends(n: int) -> None:
    """i(n + 1 − i) steps, whatever the number of states that are eliminated together."""
    moves = random_walk(n, 0.5)
    absorbed = np.zeros(n)
    absorbed[0] += 0.5
    absorbed[-1] += 0.5
    expected = [i * (n + 1 - i) for i in range(1, n + 1)]
    assert steps_to_absorption(moves, absorbed) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("up", [0.3, 0.7])
def test_a_walk_against_the_wind_keeps_its_digits(up: float) -> None:
    """Of 80 states, reflected at the first and absorbed beyond the last: the first passage up one
    state takes s(i) = (1 + (1 − p)·s(i − 1)) / p steps, s(0) = 1/p, 1e29 in all at p = 0.3 (W.
    Feller 1968, An Introduction to Probability Theory, chapter XIV: from memory). At p = 0.7 the
    blocks at the top are hardly ever left downwards."""
    n = 80
    moves = random_walk(n, up)
    moves[0, 0] = 1 - up
    absorbed = np.zeros(n)
    absorbed[-1] = up
    each = [1 / up]
    for _ in range(n - 1):
        each.append((1 + (1 - up) * each[-1]) / up)
    expected = np.cumsum(each[::-1])[::-1]
    assert steps_to_absorption(moves, absorbed) == pytest.approx(expected, rel=1e-11)


def test_a_block_that_is_hardly_ever_left_keeps_its_digits() -> None:
    """Thirty states that mix at once and one in front of them, from which alone there is an end:
    the mean of the geometric number of visits."""
    n, leave, end = 31, 1e-14, 1e-3
    moves = np.full((n, n), 1 / (n - 1))
    moves[:, 0] = leave
    moves[0, 1:] = (1 - end) / (n - 1)
    absorbed = np.zeros(n)
    absorbed[0] = end
    steps = steps_to_absorption(moves, absorbed)
    first = (1 + (1 - end) / leave) / end
    assert steps[0] == pytest.approx(first, rel=1e-12)
    assert steps[1:] == pytest.approx(np.full(n - 1, first + 1 / leave), rel=1e-12)
