"""A session the broker lost: an alert for each characteristic, once, until readings come again."""

from __future__ import annotations

import json
from dataclasses import replace
from hashlib import sha256

import pytest
from jsonschema import Draft202012Validator
from plans import GAUGE, START, characteristic, engine, events, fold, kinds, reading, shewhart

from monitor import describe, messages
from monitor.alerts import Numbering
from monitor.engine import Engine
from monitor.entries import Configured, Connected, Disconnected, Message, Started
from monitor.gauge import GaugeAlerts
from monitor.outputs import Alert
from monitor.plan import ByWindow, CharacteristicPlan, Plan
from monitor.times import SECOND, format_time

HEADS = replace(GAUGE, stream=(("head", ("head",)),))
QUIET = replace(characteristic(), judgement=None)


def at(second: float) -> int:
    return START + round(second * SECOND)


def lost(into: Engine, second: float) -> list[str]:
    """The kinds of the events that a lost session causes."""
    outputs = fold(into, [Disconnected(at(second)), Connected(at(second), False)])
    return kinds(events(outputs))


def test_the_first_session_is_new_and_not_lost() -> None:
    new = engine(characteristic())
    assert fold(new, [Started(START), Connected(START, False)]) == []
    assert new.sessions_lost == 0
    assert fold(new, [Disconnected(at(1)), Connected(at(2), True)]) == []
    assert lost(new, 3) == ["raised"]
    assert new.sessions_lost == 1


def test_also_where_it_is_lost_while_we_are_away() -> None:
    old = engine(characteristic())
    fold(old, [Started(START), Connected(START, True)])
    outputs = fold(old, [Started(at(60)), Connected(at(61), False)])
    assert kinds(events(outputs)) == ["raised"]


def test_every_characteristic_is_told_once() -> None:
    both = engine(characteristic(name="weight"), characteristic(name="torque"))
    fold(both, [Connected(START, True)])
    outputs = fold(both, [Disconnected(at(1)), Connected(at(1), False)])
    assert [output.characteristic.name for output in outputs if isinstance(output, Alert)] == [
        "weight",
        "torque",
    ]
    assert both.counts.alerts == 2
    assert lost(both, 2) == [], "it is open already"
    assert both.sessions_lost == 2


def test_what_is_said_of_it() -> None:
    plan = characteristic(title="Net weight, 340 g jar")
    gauge = GaugeAlerts(plan, Numbering())
    (event,) = gauge.met("session-lost", START)
    identity = b'[1,"weight",{},"gauge","session-lost","%d"]' % START  # canonical: RFC 8785
    assert event == {
        "schema": 1,
        "id": sha256(identity).hexdigest()[:32],
        "sequence": 1,
        "event": "raised",
        "characteristic": "weight",
        "title": "Net weight, 340 g jar",
        "stream": {},
        "time": "2026-03-02T06:41:12.000Z",
        "detector": "gauge",
        "chart": None,
        "rule": "session-lost",
        "direction": None,
        "priority": plan.priority.other,
        "text": event["text"],
        "statistic": None,
        "signals": [
            {
                "detector": "gauge",
                "rule": "session-lost",
                "time": "2026-03-02T06:41:12.000Z",
                "count": 1,
            }
        ],
        "subgroup": None,
        "shift": None,
        "specification": None,
        "baseline": None,
        "reaction": event["reaction"],
        "caution": event["caution"],
        "reason": None,
    }
    assert event["text"].startswith("Net weight: the broker lost our session")
    assert event["reaction"]
    assert [each["id"] for each in gauge.open()] == [event["id"]]


def test_every_event_of_it_follows_the_schema() -> None:
    gauge = GaugeAlerts(characteristic(), Numbering())
    validator = Draft202012Validator(describe.json_schemas()["alert"])
    told = [*gauge.met("session-lost", START), *gauge.ended(at(1))]
    told += [*gauge.met("session-lost", at(2)), *gauge.withdraw(at(3))]
    assert kinds(told) == ["raised", "returned-to-normal", "raised", "withdrawn"]
    assert len({event["text"] for event in told}) == 3
    for event in told:
        published = messages.published(messages.encode(event), format_time(START))
        validator.validate(json.loads(published))


@pytest.mark.parametrize(
    ("plan", "gap"),
    [
        (characteristic(size=2), 1),
        (replace(characteristic(), subgroup=ByWindow(SECOND, 1)), 5),
        (replace(characteristic(), judgement=None), 1),
    ],
    ids=["by-count", "by-window", "not-judged"],
)
def test_it_is_over_when_readings_come_again(plan: CharacteristicPlan, gap: int) -> None:
    line = engine(replace(plan, off_delay=20 * SECOND))
    fold(line, [Connected(START, True), *(reading(0.0, n, n) for n in range(4))])
    assert lost(line, 10) == ["raised"]
    told = []
    for n in range(40):
        told += [(n, *kinds(events(line.fold(reading(0.0, 11 + n * gap, 10 + n)))))]
    over = [n for n, *kind in told if kind == ["returned-to-normal"]]
    assert len(over) == 1, "not again"
    assert 20 <= 1 + over[0] * gap < 20 + 2 * gap + 1, "not before off_delay, and soon after"
    assert lost(line, 500) == ["raised"], "and may be lost again"


def test_set_aside_readings_do_not_end_it() -> None:
    line = engine(characteristic())
    fold(line, [Connected(START, True), reading(0.0, 0, 0)])
    assert lost(line, 10) == ["raised"]
    assert events(fold(line, [reading("x", 11, 1), reading(0.0, 0, 0)])) == []
    assert kinds(events(fold(line, [reading(0.0, 12, 2)]))) == ["returned-to-normal"]


def test_where_there_is_but_one_stream_events_are_counted_together() -> None:
    line = engine(characteristic(shewhart(width=3.0)))
    told = events(fold(line, [Connected(START, True), reading(9.0, 0, 0)]))
    told += events(fold(line, [Disconnected(at(1)), Connected(at(1), False)]))
    told += events(fold(line, [reading(-9.0, 2, 1)]))
    assert [(event["sequence"], event["rule"], event["event"]) for event in told] == [
        (1, "outside-upper", "raised"),
        (2, "session-lost", "raised"),
        (3, "outside-upper", "returned-to-normal"),
        (4, "outside-lower", "raised"),
        (5, "session-lost", "returned-to-normal"),
    ]


def test_streams_with_keys_count_their_own() -> None:
    line = engine(characteristic(shewhart(width=3.0), source=HEADS))
    told = events(fold(line, [Connected(START, True), reading(9.0, 0, 0, head=1)]))
    told += events(fold(line, [Disconnected(at(1)), Connected(at(1), False)]))
    told += events(fold(line, [reading(-9.0, 2, 1, head=1)]))
    assert [(event["stream"], event["sequence"]) for event in told] == [
        ({"head": "1"}, 1),
        ({}, 1),
        ({"head": "1"}, 2),
        ({"head": "1"}, 3),
        ({}, 2),
    ]


@pytest.mark.parametrize("source", [GAUGE, HEADS], ids=["one-stream", "streams"])
def test_a_restored_engine_counts_on(source: object) -> None:
    plan = characteristic(shewhart(width=3.0), source=source, off_delay=SECOND)  # type: ignore[arg-type]
    line = engine(plan)
    fold(line, [Connected(START, True), reading(9.0, 0, 0, head=1)])
    streams = [state.state() for state in line.streams()]
    lost(line, 1)  # after the stream was taken down, and it is not taken down again for this
    again = engine(plan)
    again.restore(line.state(), streams)
    entries: list[Message | Disconnected | Connected] = [
        reading(-9.0, 5, 1, head=1),
        Disconnected(at(6)),
        Connected(at(7), False),
    ]
    expected = events(fold(line, entries))
    assert events(fold(again, entries)) == expected
    assert [event["rule"] for event in expected] == [
        "outside-upper",
        "outside-lower",
        "session-lost",
        "session-lost",
    ]


def test_it_leaves_with_its_characteristic() -> None:
    line = engine(characteristic())
    fold(line, [Connected(START, True)])
    assert lost(line, 1) == ["raised"]
    (event,) = events(line.fold(Configured(at(2), Plan(()))))
    assert (event["event"], event["reason"]) == ("withdrawn", "configuration")
    assert event["rule"] == "session-lost"


@pytest.mark.parametrize(
    "other",
    [characteristic(title="Another title"), characteristic(source=HEADS), QUIET],
    ids=["title", "keys", "not-judged"],
)
def test_another_configuration_moves_nothing_that_is_open(other: CharacteristicPlan) -> None:
    line = engine(characteristic())
    fold(line, [Connected(START, True)])
    assert lost(line, 1) == ["raised"]
    told = events(fold(line, [Configured(at(2), Plan((other,))), reading(0.0, 3, 1, head=1)]))
    assert [(e["event"], e["sequence"], e["title"]) for e in told] == [
        ("returned-to-normal", 2, other.title)
    ]
