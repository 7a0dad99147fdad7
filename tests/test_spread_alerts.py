"""The life of an alert that a CUSUM of the variance raises, through the engine."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace

from plans import characteristic, engine, events, fold, points, readings, shewhart

from monitor.messages import AlertEvent
from monitor.plan import CusumPlan, Scheme
from monitor.times import SECOND

CUSUM = CusumPlan("variance", 1.46, 6.0, k_lower=0.65, h_lower=4.0, size=5)


def told(scales: Iterable[float], *schemes: Scheme, seed: int = 4) -> list[AlertEvent]:
    """Events of subgroups of five whose readings' spread is each of ``scales``."""
    chance = random.Random(seed)
    values = [341.2 + 1.9 * scale * chance.gauss(0, 1) for scale in scales for _ in range(5)]
    plan = characteristic(*schemes, mean=341.2, sigma=1.9, size=5, rejoin=600 * SECOND)
    return events(fold(engine(plan), readings(values)))


def test_a_wider_spread_is_one_alert_until_it_is_over() -> None:
    found = told([1.0] * 40 + [2.0] * 60 + [1.0] * 60, CUSUM)
    assert [event["event"] for event in found] == ["raised", "returned-to-normal"]
    raised, over = found
    assert (raised["rule"], raised["chart"], raised["direction"]) == (
        "cusum-upper",
        "variance",
        None,
    )
    assert raised["statistic"] is not None
    assert raised["statistic"]["unit"] == "g²"
    assert raised["statistic"]["name"] == "upper_sum"
    assert raised["statistic"]["upper"] == 6.0 * 1.9**2
    assert raised["shift"] is None
    assert raised["priority"] == "low"
    assert "varies more than usual: about " in raised["text"]
    assert "times its usual spread since about 06:44:" in raised["text"]
    assert over["text"].endswith("has returned to normal: it varies as usual.")
    assert over["time"] > "2026-03-02T06:49:30"


def test_a_narrower_spread_shares_the_slot() -> None:
    found = told([3.0] * 12 + [0.2] * 40, replace(CUSUM, h_lower=0.5))
    assert [event["event"] for event in found][:2] == ["raised", "updated"]
    assert found[1]["signals"][1]["rule"] == "cusum-lower"
    assert "varies less than usual: about 0." in found[1]["text"]


def test_each_chart_of_spread_has_a_slot_of_its_own() -> None:
    found = told([3.0] * 10, CUSUM, shewhart(chart="range", width=2.0))
    assert {event["chart"] for event in found} == {"variance", "range"}


def test_nothing_wrong_rings_nothing() -> None:
    assert told([1.0] * 200, CusumPlan("variance", 1.46, 14.0, direction="up", size=5)) == []


def test_points_show_both_sums() -> None:
    plan = characteristic(CUSUM, mean=0.0, sigma=2.0, size=5)
    (only,) = points(fold(engine(plan), readings([-2.0, -1.0, 0.0, 1.0, 2.0])))
    # Variance 2.5 of the usual 4: 0.625 times; the upper sum stays 0, the lower gains 0.025.
    assert [(row.chart, row.statistic, round(row.value, 9)) for row in only.rows] == [
        ("variance", "upper_sum", 0.0),
        ("variance", "lower_sum", 0.1),
    ]
