"""One characteristic's part of what was recorded: it is judged as in the whole."""

from __future__ import annotations

from dataclasses import replace

import journals
import plans
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.commandline import CommandError
from monitor.engine import Engine
from monitor.entries import Configured, Message, Recorded, Started, State, Tick
from monitor.excerpt import excerpt, having
from monitor.history import taken
from monitor.outputs import Points
from monitor.plan import Plan

TOPICS = {
    "weight": {"line/scale/1", "line/scale/2"},
    "glue": {"line/glue"},
    "torque": {"line/torque"},
}


def part(
    name: str, recorded: list[Recorded], state: State | None = None
) -> tuple[Engine, list[Recorded]]:
    """The engine that the part begins with, and its entries."""
    whole: list[State | Recorded] = [] if state is None else [state]
    found = list(excerpt([*whole, *recorded], name))
    engine = Engine(Plan(()), points=True)
    if state is not None:
        first = found.pop(0)
        assert isinstance(first, State)
        engine = journals.resumed(first, points=True)
    return engine, [each for each in found if not isinstance(each, State)]


def shown(points: Points) -> tuple[object, ...]:
    """A subgroup and what was made of it."""
    subgroup = points.subgroup
    return points.stream, subgroup.number, subgroup.first, subgroup.values, points.rows


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10_000), st.floats(0, 1), st.sampled_from(sorted(TOPICS)))
def test_it_is_judged_as_in_the_whole(seed: int, begins: float, name: str) -> None:
    day = journals.day(seed, seconds=60)
    after = round(begins * len(day))
    whole = Engine(Plan(()), points=True)
    plans.fold(whole, day[:after])
    state = taken(whole) if after else None
    engine, rest = part(name, day[after:], state)
    expected = plans.fold(whole, day[after:])
    got = plans.fold(engine, rest)
    events = [each for each in plans.events(expected) if each["characteristic"] == name]
    points = [each for each in plans.points(expected) if each.characteristic.name == name]
    assert plans.events(got) == events
    assert list(map(shown, plans.points(got))) == list(map(shown, points))
    assert {each.topic for each in rest if isinstance(each, Message)} <= TOPICS[name]
    assert taken(engine).streams == tuple(
        each for each in taken(whole).streams if each["characteristic"] == name
    )


def test_what_was_left_out_before_an_outage_was_heard_all_the_same() -> None:
    window = plans.reading(165.0, 0, 1)
    entries: list[Recorded] = [
        Configured(plans.START, journals.PLAN),
        replace(window, topic="line/glue"),
        plans.message(b"2.0", 3, "line/torque"),
        Started(plans.START + 9_000_000),
    ]
    _, found = part("glue", entries)
    assert found == [
        Configured(plans.START, Plan((journals.GLUE,))),
        entries[1],
        Configured(plans.START + 3_000_000, Plan((journals.GLUE,))),
        entries[3],
    ]


def test_topics_follow_the_configuration_in_force() -> None:
    moved = replace(journals.GLUE, source=replace(journals.GLUE.source, topic="line/new"))
    old, new = plans.message({}, 1, "line/glue"), plans.message({}, 3, "line/new")
    _, found = part(
        "glue",
        [
            new,
            Configured(plans.START, journals.PLAN),
            old,
            new,
            Configured(plans.START + 2, Plan((journals.TORQUE, moved))),
            old,
            new,
        ],
    )
    assert [each for each in found if isinstance(each, Message)] == [old, new]
    assert found[-2] == Configured(plans.START + 2, Plan((moved,)))


def test_an_unknown_characteristic_is_answered_with_those_there_are() -> None:
    recorded: list[Recorded] = [Tick(1), Configured(2, journals.PLAN)]
    with pytest.raises(CommandError, match=r"no characteristic 'glu' at 1970-.*weight, glue, torq"):
        list(having(recorded, "glu"))
    assert list(having(recorded, "glue")) == recorded
