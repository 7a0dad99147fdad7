"""Moves that last, against published critical values and on processes of which they are known."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from streams import following

from monitor.methods.normal import Array
from monitor.methods.shift import Move, chance, levelled, moves

STEADY = ("normal", "0.5", "0.8", "heavy", "skewed", "rounded")


def steady(rng: np.random.Generator, kind: str, count: int) -> Array:
    """A process that keeps to its centre."""
    match kind:
        case "normal":
            return rng.normal(size=count)
        case "heavy":
            return rng.standard_t(4, count)
        case "skewed":
            return rng.exponential(size=count)
        case "rounded":
            return np.round(rng.normal(size=count))
    return np.asarray(following(rng, float(kind), count)[:, 0])


@pytest.mark.parametrize(
    ("edge", "probability", "squared"),
    [(0.15, 0.10, 7.12), (0.15, 0.05, 8.68), (0.15, 0.01, 12.16)],
)
def test_critical_values_as_printed(edge: float, probability: float, squared: float) -> None:
    """D. W. K. Andrews 2003, Econometrica 71, corrected table I, one parameter (from memory)."""
    assert chance(squared**0.5, edge) == pytest.approx(probability, rel=0.2)


def test_a_longer_reach_is_rarer() -> None:
    chances = [chance(reach, 0.01) for reach in np.linspace(0, 8, 200)]

    assert chances[0] == 1
    assert all(one >= other for one, other in pairwise(chances))
    assert chances[-1] < 1e-11


@pytest.mark.parametrize(
    ("kind", "count", "recordings"),
    [
        *((kind, 300, 60) for kind in STEADY),
        *(
            pytest.param(kind, count, 400, marks=pytest.mark.long)
            for kind in STEADY
            for count in (300, 1000, 3000)
        ),
    ],
)
def test_a_steady_process_is_hardly_ever_said_to_move(
    kind: str, count: int, recordings: int
) -> None:
    rng = np.random.default_rng(count)
    said = sum(bool(moves([steady(rng, kind, count)])) for _ in range(recordings))

    assert said <= 0.005 * recordings + 2


@pytest.mark.parametrize("at", [0.05, 0.5, 0.8, 0.95])
@pytest.mark.parametrize("kind", STEADY)
def test_a_lasting_step_is_seen_wherever_it_lies(kind: str, at: float) -> None:
    """Of two standard deviations of what is charted, in 1,500 subgroups."""
    rng = np.random.default_rng(340)
    index = round(1500 * at)
    seen: list[Move] = []
    for _ in range(10):
        series = steady(rng, kind, 1500)
        series[index:] += 2 * series.std()
        seen += moves([rng.normal(size=1500), series])
    assert {each.number for each in seen} == {1}
    # 75 of those that follow each other closely are worth eight.
    assert len(seen) >= (5 if kind == "0.8" and at in (0.05, 0.95) else 10)
    assert np.median([abs(each.index - index) for each in seen]) <= 20
    assert all(each.by > 0 and each.late == (at >= 0.5) for each in seen if at != 0.5)
    assert all(each.share == pytest.approx(min(at, 1 - at), abs=0.05) for each in seen)


def test_many_that_move_a_little_together_are_seen() -> None:
    rng = np.random.default_rng(6)
    series = list(rng.normal(size=(12, 600)))
    assert moves(series) == ()
    for each in series:
        each[480:] += 0.2
    found = moves(series)

    assert sorted(each.number for each in found) == list(range(12))
    assert len({each.index for each in found}) == 1
    assert abs(found[0].index - 480) <= 90


def test_what_is_levelled_no_longer_moves() -> None:
    series = list(np.random.default_rng(7).normal(size=(3, 800)))
    series[1][700:] += 2
    found = moves(series)
    flat = levelled(series, found)

    assert moves(flat) == ()
    assert flat[1][found[0].index :].mean() == pytest.approx(flat[1][: found[0].index].mean())
    assert series[1][700:].mean() > 1.5
    assert all(flat[at] is series[at] for at in (0, 2))


def test_wild_values_at_the_end_are_no_new_level() -> None:
    series = np.random.default_rng(8).normal(size=500)
    series[-5:] = 1e6

    assert moves([series]) == ()


@pytest.mark.parametrize("series", [[], [np.arange(49.0)], [np.ones(500)], [np.empty(0)]])
def test_what_is_too_short_or_constant_did_not_move(series: list[Array]) -> None:
    assert moves(series) == ()


def test_a_step_without_noise_moved() -> None:
    (found,) = moves([np.repeat([1.0, 2.0], [80, 20])])

    assert (found.index, found.by, found.share, found.late) == (80, 1.0, 0.2, True)
