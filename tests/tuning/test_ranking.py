"""Which settings come first, for the mean and for the spread, and which two go together."""

from __future__ import annotations

from dataclasses import replace

import pytest
from results import trustworthy

from replay.tuning.ranking import keeps, ranked, that_ranks, to_take
from replay.tuning.result import Setting

PLAIN, *_, SPREAD = trustworthy(4).settings
CATCH = 1.5


def made(
    setting: Setting, name: str, pieces: float, grouping: int = 0, origin: str = "calibrated"
) -> Setting:
    """A setting that keeps what is asked of it and catches what ranks it within ``pieces``."""
    delay = that_ranks(setting, CATCH)
    assert delay is not None
    late = replace(delay, late_readings=replace(delay.late_readings, value=pieces))
    return replace(
        setting,
        name=name,
        delays=(late,),
        grouping=grouping,
        origin=origin,  # type: ignore[arg-type]
        meets=True,
        rank=None,
        unranked="",
    )


def test_those_for_the_spread_are_ranked_among_themselves() -> None:
    settings = [
        made(SPREAD, "late spread", 90),
        made(PLAIN, "late mean", 300),
        made(SPREAD, "early spread", 40),
        replace(made(PLAIN, "loud", 10), meets=False),
        made(PLAIN, "early mean", 200),
    ]
    order = [each for _, each in ranked(settings, CATCH)]
    assert [(each.name, each.rank) for each in order] == [
        ("early mean", 1),
        ("late mean", 2),
        ("early spread", 1),
        ("late spread", 2),
        ("loud", None),
    ]
    assert order[-1].unranked
    assert {settings[i].name: s.name for i, s in ranked(settings, CATCH)} == {
        each.name: each.name for each in settings
    }


def test_a_spread_missed_too_often_is_not_ranked() -> None:
    missed = made(SPREAD, "missed", 90)
    gone = replace(missed.delays[0].late_readings, value=None)
    missed = replace(missed, delays=(replace(missed.delays[0], late_readings=gone),))
    ((_, found),) = ranked([missed], CATCH)
    assert found.rank is None
    assert "missed more than one in ten" in found.unranked


@pytest.mark.parametrize(
    ("spreads", "taken"),
    [
        ([made(SPREAD, "other subgroups", 40, 1), made(SPREAD, "beside", 60)], "beside"),
        ([made(SPREAD, "other baseline", 40, 0, "configured")], None),
        ([], None),
    ],
)
def test_the_two_to_take_share_subgroups_and_baseline(
    spreads: list[Setting], taken: str | None
) -> None:
    order = [each for _, each in ranked([made(PLAIN, "mean", 100), *spreads], CATCH)]
    best, spread = to_take(order)
    assert best == 0
    assert (None if spread is None else order[spread].name) == taken


def test_without_one_for_the_mean_nothing_is_taken() -> None:
    order = [each for _, each in ranked([made(SPREAD, "alone", 40)], CATCH)]
    assert order[0].rank == 1
    assert to_take(order) == (None, None)


def test_a_part_is_kept_or_not_by_what_was_asked_of_it() -> None:
    loud = replace(made(PLAIN, "loud", 10), meets=False)
    assert loud.extrapolated is not None
    high = loud.extrapolated.interval.high
    assert high is not None
    assert keeps(replace(loud, asked=0.9 * high)) == "not shown"
    assert keeps(replace(loud, asked=1.1 * high)) == "no"
