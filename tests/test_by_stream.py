"""A baseline for each stream: its own limits, and none at all for a stream that has none."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import pytest
from plans import (
    GAUGE,
    START,
    characteristic,
    engine,
    events,
    fold,
    points,
    reading,
    shewhart,
)

from monitor.engine import Engine
from monitor.entries import Connected, Disconnected
from monitor.outputs import Output
from monitor.plan import (
    BaselinePlan,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    Judgement,
    Scheme,
    Stream,
)
from monitor.times import SECOND

SOURCE = replace(
    GAUGE,
    topic="line/+/weight",
    captures=((1, "lane"),),
    stream=(("head", ("head",)),),
)


def own(mean: float, sigma: float, *schemes: Scheme, between: float = 0.0) -> Judgement:
    """A judgement whose revisions say which baseline they are of."""
    baseline = BaselinePlan(mean, sigma, between, f"baseline at {mean}")
    detectors = [
        DetectorPlan(f"own-{place}", "any", scheme, f"detector {place} at {mean}")
        for place, scheme in enumerate(schemes or (shewhart(),))
    ]
    return Judgement(baseline, tuple(detectors))


def head(number: int, lane: int = 1) -> Stream:
    return (("head", str(number)), ("lane", str(lane)))


def plan(
    by_stream: Mapping[Stream, Judgement], common: Judgement | None = None
) -> CharacteristicPlan:
    made = characteristic(source=SOURCE)
    return replace(made, judgement=common, by_stream=by_stream)


HEADS = {
    head(1): own(10.0, 1.0),
    head(2): own(20.0, 2.0, shewhart(), CusumPlan("individual", 0.5, 4.0)),
}


def weighed(watching: Engine, *values: float, lane: int = 1, **more: int) -> list[Output]:
    """The same values from heads 1, 2 and 3, or from the ``head`` given."""
    heads = [more["head"]] if "head" in more else [1, 2, 3]
    entries = [
        replace(reading(value, second, second, head=number), topic=f"line/{lane}/weight")
        for second, value in enumerate(values, more.get("start", 0))
        for number in heads
    ]
    return fold(watching, entries)


def test_each_stream_is_held_against_its_own_limits() -> None:
    made = points(weighed(engine(plan(HEADS)), 12.0))
    limits = {
        dict(p.stream)["head"]: [(r.detector, r.centre, r.lower, r.upper) for r in p.rows]
        for p in made
    }
    assert limits == {
        "1": [("own-0", 10.0, 7.0, 13.0)],
        "2": [
            ("own-0", 20.0, 14.0, 26.0),
            ("own-1", 0.0, None, 8.0),
            ("own-1", 0.0, None, 8.0),
        ],
        "3": [],
    }


def test_one_value_is_too_high_for_one_and_too_low_for_another() -> None:
    found = events(weighed(engine(plan(HEADS)), 13.5))
    assert [(e["stream"]["head"], e["rule"], e["direction"]) for e in found] == [
        ("1", "outside-upper", "up"),
        ("2", "outside-lower", "down"),
    ]
    assert [e["baseline"] for e in found] == [
        {"revision": "baseline at 10.0", "mean": 10.0, "sigma": 1.0},
        {"revision": "baseline at 20.0", "mean": 20.0, "sigma": 2.0},
    ]
    shifts = [e["shift"]["estimate"] for e in found if e["shift"]]
    assert shifts == pytest.approx([3.5, -6.5])
    assert [e["text"].split(" since")[0] for e in found] == [
        "Net weight, lane 1 head 1, has risen by about 3.5 g",
        "Net weight, lane 1 head 2, has fallen by about 6.5 g",
    ]


def test_what_a_stream_lacks_it_takes_from_all() -> None:
    watching = engine(plan(HEADS, common=own(0.0, 5.0)))
    made = points(weighed(watching, 14.0))
    assert [(r.centre, r.upper) for r in made[2].rows] == [(0.0, 15.0)]
    found = events(weighed(watching, 15.5, head=3, start=1))
    assert [e["baseline"] and e["baseline"]["mean"] for e in found] == [0.0]


def test_the_whole_stream_must_match() -> None:
    # Head 1 of another lane, and a head that is only spelt alike, have no baseline.
    watching = engine(plan(HEADS))
    outputs = weighed(watching, 99.0, lane=2) + weighed(watching, 99.0, head=10)
    assert [p.rows for p in points(outputs)] == [()] * 4
    assert events(outputs) == []


def test_a_stream_without_a_baseline_is_gathered_and_not_judged() -> None:
    watching = engine(plan(HEADS))
    outputs = weighed(watching, *[50.0 + n for n in range(20)], head=3)
    assert [p.subgroup.number for p in points(outputs)] == list(range(1, 21))
    assert all(p.rows == () for p in points(outputs))
    assert events(outputs) == []
    counts = watching.counts
    assert (counts.readings, counts.subgroups, counts.signals, counts.alerts) == (20, 20, 0, 0)


def test_and_its_standing_says_so() -> None:
    watching = engine(plan(HEADS))
    watching.fold(Connected(START - SECOND, session_present=True))
    weighed(watching, 10.0, 11.0, 12.0)
    told = {dict(s.stream)["head"]: watching.standing(s) for s in watching.streams()}
    assert told["1"]["judging"] == {
        "judging": True,
        "since": "2026-03-02T06:41:12.000Z",
        "why": None,
    }
    assert told["3"]["judging"] == {
        "judging": False,
        "since": "2026-03-02T06:41:12.000Z",
        "why": "no baseline",
    }
    assert told["3"]["open"] == []
    assert told["3"]["subgroup"] is not None
    assert told["3"]["subgroup"]["mean"] == 12.0
    # While we are blind, that is the reason for every stream.
    watching.fold(Disconnected(START + 9 * SECOND))
    whys = {watching.standing(s)["judging"]["why"] for s in watching.streams()}
    assert len(whys) == 1
    assert "no baseline" not in whys


def test_its_standing_is_brought_up_to_date_with_every_subgroup() -> None:
    watching = engine(plan(HEADS))
    for second in range(3):
        watching.touched.clear()
        weighed(watching, 1.0, head=3, start=second)
        assert [s.stream for s in watching.touched] == [head(3)]
        (state,) = watching.touched
        shown = watching.standing(state)["subgroup"]
        assert shown is not None
        assert shown["number"] == second + 1


def test_a_gauge_restart_of_a_stream_without_a_baseline_withdraws_nothing() -> None:
    watching = engine(plan(HEADS))
    outputs = weighed(watching, *[50.0] * 5, head=3)
    restart = replace(reading(50.0, 9, 0, head=3), topic="line/1/weight")
    outputs += watching.fold(restart)
    assert events(outputs) == []
    assert [p.subgroup.number for p in points(outputs)] == [1, 2, 3, 4, 5, 6]


def test_alerts_of_streams_know_nothing_of_each_other() -> None:
    watching = engine(plan({head(1): own(10.0, 1.0), head(2): own(10.0, 1.0)}))
    found = events(weighed(watching, 10.0, 14.0, 10.0))
    assert [(e["event"], e["stream"]["head"], e["sequence"]) for e in found] == [
        ("raised", "1", 1),
        ("raised", "2", 1),
    ]
    assert found[0]["id"] != found[1]["id"]


def test_without_any_baseline_the_engine_only_gathers() -> None:
    watching = engine(plan({}))
    outputs = weighed(watching, 1e9)
    assert len(points(outputs)) == 3
    assert events(outputs) == []
    assert {watching.standing(s)["judging"]["why"] for s in watching.streams()} == {"no baseline"}
