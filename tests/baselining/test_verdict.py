"""The verdict on streams whose truth is known: trusted where they may be, and only there."""

from __future__ import annotations

import re

import numpy as np
import pytest
from plans import START
from streams import MINUTE, SHEWHART, assessed, following, gathered, heads, kinds

from monitor.baselining.material import Clues
from monitor.baselining.stuck import stuck
from monitor.methods.cycles import cycle
from monitor.times import SECOND


@pytest.fixture
def chance() -> np.random.Generator:
    return np.random.default_rng(340)


def test_independent_normal_readings_are_trusted(chance: np.random.Generator) -> None:
    found = assessed(gathered(chance.normal(341.2, 1.9, (2000, 5))))

    assert (found.verdict, found.reasons) == ("trust", ())
    assert found.baselines.common is not None
    assert found.baselines.common.mean == pytest.approx(341.2, abs=0.1)
    assert found.baselines.common.sigma == pytest.approx(1.9, rel=0.05)
    assert not found.outside.points


@pytest.mark.parametrize(("count", "verdict"), [(10, "refuse"), (100, "provisional")])
def test_few_subgroups(chance: np.random.Generator, count: int, verdict: str) -> None:
    found = assessed(gathered(chance.normal(size=(count, 5)), every=10**10))

    assert found.verdict == kinds(found)["few"] == verdict
    assert "short" not in kinds(found)


def test_less_than_a_shift_is_provisional(chance: np.random.Generator) -> None:
    found = assessed(gathered(chance.normal(size=(2000, 5)), every=10**6))

    assert kinds(found) == {"short": "provisional"}


def test_a_walking_centre_is_refused(chance: np.random.Generator) -> None:
    steps = np.cumsum(chance.normal(size=5000)) * 0.02
    found = assessed(gathered(chance.normal(size=(5000, 5)) + steps[:, None]))

    assert found.verdict == kinds(found)["wander"] == "refuse"


def test_one_step_in_the_middle_is_refused(chance: np.random.Generator) -> None:
    readings = chance.normal(size=(4000, 5))
    readings[2000:] += 0.5

    assert kinds(assessed(gathered(readings)))["moved"] == "refuse"


@pytest.mark.parametrize("at", [0.05, 0.5, 0.8, 0.95])
@pytest.mark.parametrize("moving", [(2,), (0, 1, 2, 3, 4, 5)])
def test_a_step_anywhere_is_refused_and_told(
    chance: np.random.Generator, at: float, moving: tuple[int, ...]
) -> None:
    """All six heads, or one of them, 2 g down, as where an adjustment was made."""
    readings = chance.normal(340, 2, (6, 960, 5))
    begun = round(960 * at)
    for head in moving:
        readings[head, begun:] -= 2
    found = assessed(*heads(*readings))

    assert found.verdict == kinds(found)["moved"] == "refuse"
    assert "wander" not in kinds(found)
    assert found.reasons[0].kind == "moved"
    moved = found.estimate.moved
    assert {each.stream for each in moved} == {(("head", str(h + 1)),) for h in moving}
    for each in moved:
        assert each.by == pytest.approx(-2, abs=0.6)
        assert abs(each.time - (START + (begun + 1) * MINUTE)) <= 10 * MINUTE
        assert each.share == pytest.approx(min(at, 1 - at), abs=0.011)
        assert (each.begin == each.time) == (each.end == found.estimate.last)
    assert "few" not in kinds(found)
    assert not found.estimate.follows
    assert re.search(r"--leave-out \S+Z/\S+Z", found.reasons[0].do)


def test_a_short_part_elsewhere_leaves_a_provisional_baseline(chance: np.random.Generator) -> None:
    readings = chance.normal(340, 2, (2000, 5))
    readings[1960:] -= 1.6

    assert kinds(assessed(gathered(readings))) == {"moved": "provisional"}


def test_of_a_long_steady_recording_a_step_too_small_to_matter_is_let_be(
    chance: np.random.Generator,
) -> None:
    readings = chance.normal(size=(20_000, 5))
    readings[10_000:] += 0.1 * 5**-0.5

    assert "moved" not in kinds(assessed(gathered(readings)))


@pytest.mark.parametrize(("length", "grade"), [(576, "refuse"), (100, "provisional")])
def test_a_gauge_that_stood_still_is_named(
    chance: np.random.Generator, length: int, grade: str
) -> None:
    readings = np.round(chance.normal(340, 2, 28_800), 1)
    readings[8_640 : 8_640 + length] = readings[8_640]
    time = START + np.arange(28_800) * SECOND
    still = stuck([((("head", "3"),), time, readings)])
    streams = heads(*readings.reshape(3, 1920, 5))
    found = assessed(*streams, clues=Clues(stuck=still))

    assert kinds(found)["stuck"] == grade
    (why,) = (each for each in found.reasons if each.kind == "stuck")
    assert f"head=3 stood still: {length} readings in a row" in why.found
    assert "from 2026-03-02T09:05:12Z to 2026-03-02T09:" in why.found
    assert "--leave-out 2026-03-02T09:05:12Z/2026-03-02T09:" in why.do


@pytest.mark.parametrize(("count", "step"), [(300, 0.15), (600, 0.1)])
def test_a_short_recording_shows_a_walking_centre(
    chance: np.random.Generator, count: int, step: float
) -> None:
    """``step``: the walk's, in standard errors of a mean of five."""
    verdicts = []
    for _ in range(20):
        walk = np.cumsum(chance.normal(size=(count, 1))) * step * 5**-0.5
        found = assessed(gathered(chance.normal(size=(count, 5)) + walk[:, None]), scheme=None)
        verdicts.append(kinds(found).get("wander", kinds(found).get("moved")))
        if "wander" in kinds(found):
            (why,) = (each.found for each in found.reasons if each.kind == "wander")
            assert re.search(
                r"swings over \d+ subgroups or more are [0-9.e+]+ times as strong", why
            )

    assert verdicts.count("refuse") >= 15


@pytest.mark.parametrize(
    ("correlation", "recordings"),
    [
        *((each, 40) for each in (0.0, 0.5)),
        *(pytest.param(each, 600, marks=pytest.mark.long) for each in (0.0, 0.5, 0.8)),
    ],
)
def test_a_short_recording_of_a_steady_process_is_hardly_ever_refused(
    chance: np.random.Generator, correlation: float, recordings: int
) -> None:
    refused = [
        assessed(gathered(following(chance, correlation, 400)), scheme=None).verdict == "refuse"
        for _ in range(recordings)
    ]

    assert sum(refused) <= 0.02 * recordings + 2.3 * (0.02 * recordings) ** 0.5


@pytest.mark.parametrize(("count", "said"), [(90, "provisional"), (150, None)])
def test_what_is_too_short_to_show_wandering_says_so(
    chance: np.random.Generator, count: int, said: str | None
) -> None:
    """Of twelve streams alike, enough subgroups otherwise."""
    found = assessed(*heads(*chance.normal(340, 2, (12, count, 5))))

    assert kinds(found).get("wander-unseen") == said


def test_who_moved_and_when_is_told(chance: np.random.Generator) -> None:
    readings = [chance.normal(size=(4000, 5)) for _ in range(3)]
    readings[1][1000:] += 1.2
    found = assessed(*heads(*readings))

    (moved,) = found.estimate.moved
    assert moved.stream == (("head", "2"),)
    assert moved.by == pytest.approx(1.2, abs=0.1)
    assert abs(moved.time - (START + 1001 * MINUTE)) < 5 * MINUTE
    (why,) = (each.found for each in found.reasons if each.kind == "moved")
    assert "head=2 by +1.2 g from about 2026-03-0" in why


def test_the_stream_with_too_little_is_named(chance: np.random.Generator) -> None:
    long, short = chance.normal(size=(2000, 5)), chance.normal(1, size=(52, 5))
    found = assessed(*heads(long, short))

    (why,) = (each.found for each in found.reasons if each.kind == "few")
    assert why.startswith("head=2 has only 5")


def test_a_promise_of_which_little_is_left_comes_first(chance: np.random.Generator) -> None:
    found = assessed(gathered(following(chance, 0.5, 20_000)))

    assert found.verdict == "provisional"
    assert (found.reasons[0].kind, found.reasons[1].kind) == ("promise", "following")
    assert "driftbell-replay tune" in found.reasons[0].do
    few = assessed(gathered(chance.normal(size=(60, 5)), every=10**10))
    assert few.reasons[0].do == "first estimate from a longer recording"


def test_of_what_is_refused_no_promise_is_told(chance: np.random.Generator) -> None:
    steps = np.cumsum(chance.normal(size=5000)) * 0.02
    found = assessed(gathered(chance.normal(size=(5000, 5)) + steps[:, None]))

    assert found.verdict == "refuse"
    assert not {"promise", "long-promise"} & kinds(found).keys()
    assert not any("of the promise" in each.found for each in found.reasons)


@pytest.mark.parametrize("correlation", [0.3, 0.5, 0.8])
def test_means_that_follow_each_other_do_not_count_as_wandering(
    chance: np.random.Generator, correlation: float
) -> None:
    found = assessed(gathered(following(chance, correlation, 20_000)))

    assert found.verdict == kinds(found)["following"] == "provisional"
    assert "wander" not in kinds(found)
    # Theory of AR(1): the variance of a long mean is (1 + φ)/(1 − φ) times that of independent.
    expected = (1 + correlation) / (1 - correlation)
    assert found.estimate.inflation == pytest.approx(expected, rel=0.15)


def test_false_refusals_of_independent_streams_are_rare(chance: np.random.Generator) -> None:
    verdicts = [
        assessed(gathered(chance.normal(size=(1500, 4))), scheme=None).verdict for _ in range(60)
    ]

    assert verdicts.count("trust") >= 51  # a doubt about the centre comes once in twenty
    assert verdicts.count("refuse") <= 3


def test_heads_that_take_turns_in_one_stream_are_refused(chance: np.random.Generator) -> None:
    readings = chance.normal(size=60_000)
    readings[3::6] += 1.0  # one of six heads off by one sigma
    found = assessed(gathered(readings.reshape(-1, 5)), clues=Clues(cycle=cycle([readings])))

    assert found.verdict == kinds(found)["mixed"] == "refuse"
    assert "6 sources" in found.reasons[0].found


def test_heads_mixed_in_every_subgroup_show_without_their_order(
    chance: np.random.Generator,
) -> None:
    readings = chance.normal(size=(5000, 6)) + np.array([0, 0, 0, 0, 0, 2.0])
    shuffled = chance.permuted(readings, axis=1)

    assert kinds(assessed(gathered(shuffled)))["stratified"] == "refuse"


def test_a_coarse_gauge_is_said(chance: np.random.Generator) -> None:
    readings = np.round(chance.normal(100.3, 1, (3000, 5)))

    assert kinds(assessed(gathered(readings), clues=Clues(step=1.0)))["resolution"] == "provisional"
    assert kinds(assessed(gathered(readings), clues=Clues(step=0.1))) == {}
    coarse = np.round(chance.normal(100.5, 0.3, (3000, 5)))
    assert kinds(assessed(gathered(coarse), clues=Clues(step=1.0)))["resolution"] == "refuse"


def test_readings_that_do_not_vary_are_refused() -> None:
    found = assessed(gathered(np.full((2000, 5), 340.0)))

    assert kinds(found) == {"constant": "refuse"}
    assert found.delivered is None


def test_heads_that_differ_get_baselines_of_their_own(chance: np.random.Generator) -> None:
    apart = heads(*(chance.normal(340 + 0.5 * (head == 3), 2, (1500, 5)) for head in range(6)))
    found = assessed(*apart)

    assert kinds(found) == {"streams-differ": "note"}
    assert found.baselines.common is None
    means = [found.baselines.of(each.stream).mean for each in apart]
    assert means.index(max(means)) == 3


def test_heads_that_differ_in_spread_alone(chance: np.random.Generator) -> None:
    found = assessed(*heads(*(chance.normal(340, 2 + (h == 2), (1500, 5)) for h in range(6))))

    assert kinds(found) == {"streams-differ": "note"}


def test_heads_that_are_alike_share_one(chance: np.random.Generator) -> None:
    found = assessed(*heads(*chance.normal(340, 2, (6, 500, 5))))

    assert kinds(found) == {"streams-alike": "note"}  # 3,000 subgroups together are enough
    assert found.baselines.by_stream == {}
    assert found.verdict == "trust"


def test_own_baselines_each_need_enough(chance: np.random.Generator) -> None:
    found = assessed(*heads(*(chance.normal(340 + head, 2, (500, 5)) for head in range(6))))

    assert kinds(found)["few"] == "provisional"


def test_what_acts_between_subgroups_becomes_sigma_between(chance: np.random.Generator) -> None:
    readings = chance.normal(size=(5000, 5)) + chance.normal(0, 0.4, (5000, 1))
    found = assessed(gathered(readings))

    assert kinds(found) == {"between": "note"}
    assert found.baselines.common is not None
    assert found.baselines.common.sigma_between == pytest.approx(0.4, rel=0.05)
    assert found.baselines.common.sigma == pytest.approx(1, rel=0.02)


def test_skewness_costs_a_shewhart_chart_its_promise(chance: np.random.Generator) -> None:
    readings = chance.gamma(4.0, size=(20_000, 5))  # skewness 1
    found = assessed(gathered(readings), scheme=SHEWHART)

    assert kinds(found)["skewness"] == "provisional"
    assert found.delivered is not None
    # The project's table: skewness 1 in fives leaves a Shewhart chart 1.6e4 of 1e6.
    assert found.delivered.of_skewness == pytest.approx(0.016, rel=0.3)


def test_heavy_tails_are_said(chance: np.random.Generator) -> None:
    found = assessed(gathered(chance.standard_t(4, size=(5000, 1))))

    assert kinds(found)["tails"] == "provisional"


def test_single_readings(chance: np.random.Generator) -> None:
    found = assessed(gathered(chance.normal(165, 1.2, (4000, 1))))

    assert found.verdict == "trust"
    assert found.baselines.common is not None
    assert found.baselines.common.error(1) == pytest.approx(1.2, rel=0.05)


def test_a_stream_of_one_subgroup_is_passed_over(chance: np.random.Generator) -> None:
    one, two = heads(chance.normal(size=(1, 5)), chance.normal(size=(2000, 5)))

    assert assessed(one, two).skipped == (one.stream,)
    with pytest.raises(ValueError, match="two subgroups"):
        assessed(one)


def test_one_event_is_listed_and_does_not_pass_for_a_habit() -> None:
    readings = np.random.default_rng(1).normal(340, 2, (8000, 5))
    readings[4000:4006] -= 9
    found = assessed(gathered(readings))

    assert kinds(found) == {"outside": "note"}
    assert len(found.outside.points) == 6


def test_many_events_are_no_note(chance: np.random.Generator) -> None:
    for share, verdict in ((0.01, "provisional"), (0.1, "refuse")):
        readings = chance.normal(340, 2, (4000, 5))
        readings[chance.random(4000) < share] -= 30

        assert kinds(assessed(gathered(readings)))["outside"] == verdict
