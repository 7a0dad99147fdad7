"""How often subgroups come: by count, every so long, by window; with one stream, some, or any."""

from __future__ import annotations

from dataclasses import replace

import pytest
from plans import GAUGE, characteristic

from monitor.configuration import pace
from monitor.configuration.pace import Pace
from monitor.plan import ByCount, ByWindow, CharacteristicPlan, Stream, SubgroupPlan
from monitor.times import SECOND

MINUTE = 60 * SECOND
FIVES = ByCount(5)
FIVES_A_MINUTE = ByCount(5, every=MINUTE)
MINUTES = ByWindow(MINUTE, 3)


def plan(
    subgroup: SubgroupPlan, rate: float | None, keys: int = 0, own: int = 0, common: bool = True
) -> CharacteristicPlan:
    """A characteristic of ``rate`` readings a minute, so many stream keys and own baselines."""
    stream = tuple((f"k{i}", (f"k{i}",)) for i in range(keys))
    source = replace(GAUGE, stream=stream, expected_rate=None if rate is None else rate / 60)
    made = characteristic(source=source)
    streams: list[Stream] = [(("k0", str(i)),) for i in range(own)]
    return replace(
        made,
        subgroup=subgroup,
        judgement=made.judgement if common else None,
        by_stream=dict.fromkeys(streams, made.judgement),
    )


@pytest.mark.parametrize(
    ("subgroup", "rate", "expected"),
    [
        (FIVES, None, None),
        (FIVES, 600, Pace(0.5)),
        (FIVES_A_MINUTE, None, Pace(60)),
        (FIVES_A_MINUTE, 600, Pace(60)),
        # Five take 100 s at three a minute: the next begins as soon as one is done.
        (FIVES_A_MINUTE, 3, Pace(100)),
        (MINUTES, None, Pace(60)),
        (MINUTES, 600, Pace(60)),
        # Two a minute cannot fill a window of three each minute.
        (MINUTES, 2, Pace(90)),
    ],
)
def test_one_stream(subgroup: SubgroupPlan, rate: float | None, expected: Pace | None) -> None:
    assert pace.pace(plan(subgroup, rate)) == expected


@pytest.mark.parametrize(
    ("subgroup", "rate", "expected"),
    [
        # However many streams share the readings, all together make a subgroup of every five.
        (FIVES, 600, Pace(0.5)),
        # But how many streams keep a minute, nobody knows.
        (FIVES_A_MINUTE, 600, Pace(60, each=True)),
        (MINUTES, 600, Pace(60, each=True)),
    ],
)
def test_any_number_of_streams(subgroup: SubgroupPlan, rate: float, expected: Pace) -> None:
    assert pace.pace(plan(subgroup, rate, keys=2)) == expected
    assert pace.pace(plan(subgroup, rate, keys=2, own=12)) == expected


def test_only_streams_with_a_baseline_of_their_own() -> None:
    assert pace.pace(plan(MINUTES, 600, keys=1, own=12, common=False)) == Pace(5)
    assert pace.pace(plan(FIVES, 600, keys=1, own=12, common=False)) == Pace(0.5)


@pytest.mark.parametrize(
    ("keys", "own", "common", "exactly", "least"),
    [
        (0, 0, True, 1, 1),
        (1, 0, True, None, 2),
        (2, 0, True, None, 4),
        (2, 12, True, None, 12),
        (2, 3, False, 3, 3),
    ],
)
def test_how_many_streams(
    keys: int, own: int, common: bool, exactly: int | None, least: int
) -> None:
    made = plan(FIVES, 600, keys, own, common)
    assert (pace.streams(made), pace.least_streams(made)) == (exactly, least)


@pytest.mark.parametrize(
    ("subgroup", "rate", "keys", "expected", "size"),
    [
        (FIVES, 600, 0, None, 5),
        (MINUTES, None, 0, None, 3),
        (MINUTES, 12, 0, 12.0, 12),
        (MINUTES, 2, 0, 2.0, 3),
        (MINUTES, 12, 1, None, 3),
    ],
)
def test_readings_in_a_subgroup(
    subgroup: SubgroupPlan, rate: float | None, keys: int, expected: float | None, size: int
) -> None:
    made = plan(subgroup, rate, keys)
    assert pace.in_window(made) == expected
    assert pace.size(made) == size


def test_how_long_a_subgroup_takes() -> None:
    assert pace.takes(plan(FIVES, 600)) == 0.5
    assert pace.takes(plan(FIVES_A_MINUTE, 12)) == 25.0
    assert pace.takes(plan(MINUTES, None)) == 60.0
    assert pace.takes(plan(FIVES, None)) is None
