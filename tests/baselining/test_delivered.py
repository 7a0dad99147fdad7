"""What is said to be left of a promise, against what is left in simulation."""

from __future__ import annotations

import numpy as np
import pytest
from streams import CUSUM, SHEWHART, assessed, following, gathered

from monitor.baselining.following import Following
from monitor.methods.runlength import cusum


def left(count: int, seed: int) -> float:
    """The unlucky tenth, as told from one recording of so many independent subgroups."""
    readings = np.random.default_rng(seed).normal(340, 2, (count, 5))
    found = assessed(gathered(readings, every=10**10)).delivered
    assert found is not None
    return found.unlucky


@pytest.mark.parametrize(("count", "expected"), [(25, 0.0016), (100, 0.037), (1000, 0.5)])
def test_the_unlucky_tenth_is_that_of_the_table(count: int, expected: float) -> None:
    """The project's table of methods, "What breaks textbook promises in line": the baseline of a
    CUSUM with k 0.5 made for 1e6, simulated there."""
    told = np.median([left(count, seed) for seed in range(11)])

    assert expected / 2 < told < expected * 2.5


@pytest.mark.parametrize(
    ("count", "recordings"),
    [(60, 30), *(pytest.param(n, 300, marks=pytest.mark.long) for n in (60, 400, 1500))],
)
def test_nine_recordings_in_ten_keep_what_is_told(count: int, recordings: int) -> None:
    """The truth is known here: what each recording's own baseline really delivers."""
    kept, told = [], []
    for seed in range(recordings):
        readings = np.random.default_rng(1000 + seed).normal(size=(count, 5))
        found = assessed(gathered(readings, every=10**10))
        assert found.delivered is not None
        assert found.baselines.common is not None
        error = found.baselines.common.error(5)
        ratio = 5**-0.5 / error
        shift = -found.baselines.common.mean / error
        real = cusum.run_length(CUSUM.k / ratio, CUSUM.h / ratio, shift / ratio) / 1e6
        kept.append(real)
        told.append(found.delivered.unlucky)

    covered = np.mean([real >= said for real, said in zip(kept, told, strict=True)])
    assert 0.85 - 2.5 * (0.09 / recordings) ** 0.5 <= covered <= 0.99


@pytest.mark.parametrize(
    ("correlation", "count", "recordings"),
    [
        (0.8, 1500, 16),
        pytest.param(0.3, 4000, 150, marks=pytest.mark.long),
        pytest.param(0.5, 4000, 150, marks=pytest.mark.long),
        pytest.param(0.8, 1500, 150, marks=pytest.mark.long),
    ],
)
def test_most_recordings_keep_what_is_told_where_means_follow_each_other(
    correlation: float, count: int, recordings: int
) -> None:
    """How much they follow each other is estimated as well. The truth is that of the true
    correlations, which ``test_following`` holds against simulation."""
    means = Following(correlation ** np.arange(200))
    wider, longer = means.wider(CUSUM), means.longer(CUSUM)
    covered = 0
    for seed in range(recordings):
        readings = following(np.random.default_rng(2000 + seed), correlation, count)
        found = assessed(gathered(readings))
        assert found.delivered is not None
        assert found.baselines.common is not None
        error = found.baselines.common.error(1)
        ratio, shift = wider / error, -found.baselines.common.mean / error
        real = longer * cusum.run_length(CUSUM.k / ratio, CUSUM.h / ratio, shift / ratio) / 1e6
        covered += real >= found.delivered.unlucky

    assert covered / recordings >= 0.85 - 2.5 * (0.13 / recordings) ** 0.5


def test_an_exact_answer_costs_little() -> None:
    assert left(50_000, 1) > 0.85


@pytest.mark.parametrize(
    ("correlation", "expected"), [(0.1, 0.13), (0.3, 0.0066), (0.5, 8.3e-4), (0.8, 1.09e-4)]
)
def test_what_following_means_leave_is_about_that_of_the_table(
    correlation: float, expected: float
) -> None:
    """The project's table again: delivered of 1e6, by simulation. What is told comes of the
    correlations that a recording shows, not the true ones."""
    readings = following(np.random.default_rng(2), correlation, 50_000)
    found = assessed(gathered(readings)).delivered

    assert found is not None
    assert expected / 1.5 < found.of_following < expected * 1.5


def test_a_shewhart_chart_does_not_mind_who_follows_whom() -> None:
    readings = following(np.random.default_rng(3), 0.5, 20_000)
    found = assessed(gathered(readings), scheme=SHEWHART).delivered

    assert found is not None
    assert found.of_following == 1


def test_skewness_leaves_a_cusum_what_the_table_says() -> None:
    """Skewness 1 in fives: 4e5 of 1e6 (the project's table)."""
    readings = np.random.default_rng(4).gamma(4.0, size=(20_000, 5))
    found = assessed(gathered(readings)).delivered

    assert found is not None
    assert found.of_skewness == pytest.approx(0.4, rel=0.3)


def test_the_same_recording_gives_the_same_answer() -> None:
    assert left(300, 9) == left(300, 9)
