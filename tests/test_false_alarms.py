"""How often detectors ring with nothing wrong, in subgroups and in time."""

from __future__ import annotations

import math
import random
from dataclasses import replace

import pytest
from plans import GAUGE, characteristic, engine, fold, readings, shewhart

from monitor.configuration import false_alarms
from monitor.configuration.presets import preset
from monitor.plan import ByWindow, CharacteristicPlan, CusumPlan, RulePlan, Scheme, ShewhartPlan
from monitor.times import SECOND


def plan(*schemes: Scheme, rate: float | None = 1.0, size: int = 1) -> CharacteristicPlan:
    """A characteristic of ``rate`` readings a second."""
    return characteristic(*schemes, source=replace(GAUGE, expected_rate=rate), size=size)


def ringing(made: CharacteristicPlan, index: int = 0) -> false_alarms.DetectorRinging:
    _, judgement = made.example()
    return false_alarms.of_detector(made, judgement.detectors[index])


def test_textbook_rules_one_by_one() -> None:
    """C. W. Champ & W. H. Woodall 1987: outside 370.4, all four 91.75; a run of eight on either
    side comes once in 2⁸ − 1 points. Common practice: fives at 600 a minute ring every 3 min."""
    rules = preset("western-electric-1956", 3.0)
    found = ringing(plan(ShewhartPlan("mean", 3.0, rules), rate=10.0, size=5))
    assert found.whole.subgroups == pytest.approx(91.75, abs=0.01)
    assert found.whole.seconds == pytest.approx(45.9, abs=0.1)
    assert found.rules[0].seconds == pytest.approx(185.2, abs=0.1)
    assert found.rules[-1].subgroups == pytest.approx(255)
    assert found.whole.in_a_shift == pytest.approx(8 * 3_600 / 45.875, rel=1e-3)


def test_without_a_rate_only_subgroups() -> None:
    found = ringing(plan(shewhart(), rate=None)).whole
    assert found.subgroups == pytest.approx(370.4, abs=0.1)
    assert (found.seconds, found.in_a_shift) == (None, None)


def test_the_size_of_a_window_counts() -> None:
    """A range of twelve has other tails than one of three."""
    ranges = shewhart(chart="range")
    made = replace(plan(ranges, rate=0.2), subgroup=ByWindow(60 * SECOND, 3))
    assert ringing(made).whole == false_alarms.Ringing(
        ringing(plan(ranges, size=12)).whole.subgroups,
        pytest.approx(60 * (ringing(plan(ranges, size=12)).whole.subgroups or 0.0)),
    )


def test_never_and_not_computed() -> None:
    never = ringing(plan(shewhart(chart="moving_range", direction="down"))).whole
    assert (never.subgroups, never.in_a_shift) == (math.inf, 0.0)
    beyond = ringing(plan(CusumPlan("mean", 0.0, 400.0))).whole
    assert (beyond.subgroups, beyond.seconds) == (None, None)


def test_the_total() -> None:
    """Rates add; what nobody can know is named."""
    once = plan(shewhart(), rate=1.0)
    twice = plan(shewhart(), CusumPlan("mean", 0.5, 5.0), rate=1.0)
    streams = replace(GAUGE, stream=(("head", ("head",)),), expected_rate=1.0)
    windows = replace(
        characteristic(shewhart(), source=streams), subgroup=ByWindow(60 * SECOND), name="windows"
    )
    unpaced = replace(plan(shewhart(), rate=None), name="unpaced")
    too_long = replace(plan(CusumPlan("mean", 0.0, 400.0)), name="long")
    found = false_alarms.total((once, twice, windows, unpaced, too_long))
    alone, both = false_alarms.of_characteristic(once), false_alarms.of_characteristic(twice)
    assert alone == pytest.approx(28_800 / 370.4, rel=1e-3)
    assert both == pytest.approx(28_800 / 370.4 + 28_800 / 465.4, rel=1e-3)
    assert found.together == pytest.approx((alone or 0) + (both or 0))
    assert found.each_stream == {"windows": pytest.approx(480 / 370.4, rel=1e-3)}
    assert found.unknown == {
        "unpaced": "has no expected_rate",
        "long": "has a detector whose run length is too much to compute",
    }


@pytest.mark.parametrize("chart", ["mean", "median", "range", "sd"])
def test_the_engine_rings_as_often_as_foretold(chart: str) -> None:
    """6,000 subgroups of five normal readings: the number of signals within four standard
    deviations of what was foretold."""
    made = plan(shewhart(RulePlan("outside", width=2.2), chart=chart, width=2.2), size=5)  # type: ignore[arg-type]
    running = engine(made, points=False)
    rng = random.Random(1)
    fold(running, readings(rng.gauss(0, 1) for _ in range(30_000)))
    expected = 6_000 / (ringing(made).whole.subgroups or math.inf)
    assert expected > 100
    assert running.counts.signals == pytest.approx(expected, abs=4 * math.sqrt(expected))
