"""A recording that is only a part: it goes on from the state it begins with."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import journals
import orjson
import plans
import pytest

from monitor.engine import Engine
from monitor.entries import Configured, State, Tick
from monitor.history import taken
from monitor.plan import Plan
from monitor.recording_lines import write_jsonl
from replay.lines import decode_line
from replay.play import Played, play
from replay.recordings import Recording
from replay.tables import Layout

DAY = journals.day(seed=1)
HALF = len(DAY) // 2

Event = dict[str, Any]


def played(tmp_path: Path, plan: Plan, *recordings: Path) -> tuple[Played, list[Event]]:
    alerts = tmp_path / "alerts.jsonl"
    with alerts.open("wb") as file:
        found = play(
            plan,
            [Recording(str(each)) for each in recordings],
            Layout((), {}, None),
            1,
            alerts=file,
            progress=lambda _: None,
        )
    return found, [orjson.loads(line) for line in alerts.read_bytes().splitlines()]


def halved() -> tuple[Engine, State]:
    """An engine at the middle of the day, and what it remembers."""
    engine = Engine(Plan(()), points=False)
    plans.fold(engine, DAY[:HALF])
    return engine, taken(engine)


def written(path: Path, *recorded: Any) -> Path:
    with path.open("wb") as file:
        write_jsonl(file, recorded)
    return path


def changed(characteristic: str, **fields: Any) -> Plan:
    """The plan with some fields of one characteristic replaced."""
    return Plan(
        tuple(
            replace(each, **fields) if each.name == characteristic else each
            for each in journals.PLAN.characteristics
        )
    )


def test_a_state_line_gives_the_state_back() -> None:
    _, state = halved()
    engine = journals.resumed(state)
    again = orjson.dumps([taken(engine).engine, taken(engine).streams])
    assert again == orjson.dumps([state.engine, state.streams])


def test_it_goes_on_as_it_went_on_live(tmp_path: Path) -> None:
    whole, state = halved()
    before = whole.counts.messages
    expected = plans.events(plans.fold(whole, DAY[HALF:]))
    path = written(tmp_path / "half.jsonl", state, *DAY[HALF:])
    found, events = played(tmp_path, journals.PLAN, path)
    assert events == json.loads(json.dumps(expected))
    assert found.notes == []
    assert found.counts.messages == whole.counts.messages - before
    assert found.entries == len(DAY) - HALF
    assert found.first == DAY[HALF].time
    numbers = {each.keys: each.last.number if each.last else 0 for each in whole.streams()}
    assert sum(numbers.values()) > sum(each.subgroups for each in found.streams) > 0


def test_a_pruned_journal_goes_on_from_its_oldest_base(tmp_path: Path) -> None:
    whole, _ = halved()
    expected = plans.events(plans.fold(whole, DAY[HALF:]))
    path = journals.write(tmp_path / "j.db", DAY, (HALF,), dropped=HALF - 1)
    found, events = played(tmp_path, journals.PLAN, path)
    assert events == json.loads(json.dumps(expected))
    assert found.entries == len(DAY) - HALF


def test_an_edited_title_changes_words_only(tmp_path: Path) -> None:
    whole, state = halved()
    expected = plans.events(plans.fold(whole, DAY[HALF:]))
    path = written(tmp_path / "half.jsonl", state, *DAY[HALF:])
    found, events = played(tmp_path, changed("weight", title="Jars"), path)
    assert [(e["id"], e["sequence"]) for e in events] == [
        (e["id"], e["sequence"]) for e in expected
    ]
    assert found.notes == [
        f"{path}:1: recorded under another configuration of weight: CONFIG is used instead, "
        "and what it judges otherwise starts afresh"
    ]


def test_what_is_judged_otherwise_starts_afresh(tmp_path: Path) -> None:
    _, state = halved()
    other = replace(journals.GLUE.judgement, detectors=())  # type: ignore[type-var]
    path = written(tmp_path / "half.jsonl", state, *DAY[HALF:])
    _, events = played(tmp_path, changed("glue", judgement=other), path)
    glue = [
        each for each in events if (each["characteristic"], each["detector"]) == ("glue", "ewma")
    ]
    open_then = [
        slot
        for each in state.streams
        if each["characteristic"] == "glue"
        for slot in each["alerts"].values()
        if slot["open"]
    ]
    assert open_then
    assert [(each["event"], each["reason"]) for each in glue] == [
        ("withdrawn", "configuration") for _ in open_then
    ]


def test_our_configuration_wins_over_those_recorded(tmp_path: Path) -> None:
    plan = changed("torque", title="Torque")
    path = written(tmp_path / "whole.jsonl", *DAY)
    found, events = played(tmp_path, plan, path)
    expected = plans.events(
        plans.fold(
            Engine(plan, points=False),
            [Configured(e.time, plan) if isinstance(e, Configured) else e for e in DAY],
        )
    )
    assert events == json.loads(json.dumps(expected))
    assert found.notes == [
        f"{path}:2: recorded under another configuration of torque: CONFIG is used instead"
    ]
    assert played(tmp_path, journals.PLAN, path)[0].notes == []


def test_more_characteristics_than_were_recorded_are_no_other_configuration(tmp_path: Path) -> None:
    path = written(tmp_path / "x.jsonl", Configured(plans.START, Plan((journals.GLUE,))))
    assert played(tmp_path, journals.PLAN, path)[0].notes == []


def test_a_state_in_the_middle_is_passed_over(tmp_path: Path) -> None:
    _, state = halved()
    first = written(tmp_path / "1.jsonl", *DAY[:HALF])
    second = written(tmp_path / "2.jsonl", state, *DAY[HALF:])
    found, events = played(tmp_path, journals.PLAN, first, second)
    whole = plans.events(plans.fold(Engine(journals.PLAN, points=False), DAY))
    assert events == json.loads(json.dumps(whole))
    assert found.notes == [f"{second}:1: a state that is passed over, as it is not the beginning"]


@pytest.mark.parametrize(
    ("change", "why"),
    [
        ({"plan": {"is": "Plan", "colour": 1}}, 'a "state" of another version'),
        ({"engine": None}, 'a "state" of another version'),
        ({"engine": {"version": 0}}, "a state that this version cannot read"),
        ({"streams": [{}]}, "a state that this version cannot read"),
    ],
)
def test_a_state_of_another_version_ends_the_play(tmp_path: Path, change: Event, why: str) -> None:
    _, state = halved()
    path = written(tmp_path / "x.jsonl", state)
    path.write_bytes(orjson.dumps(orjson.loads(path.read_bytes()) | change))
    with pytest.raises(Exception, match=f"x.jsonl:1: {why}"):
        played(tmp_path, journals.PLAN, path)


def test_a_configuration_of_another_version_is_no_entry() -> None:
    with pytest.raises(ValueError, match="a configuration of another version"):
        decode_line(b'{"time":1,"control":"config","plan":{"is":"Plan"}}')
    assert decode_line(b'{"time":1,"control":"tick"}') == Tick(1_000_000)
