"""Encoding: what is sent can be read back exactly, and a stream's topic leads to it alone."""

from __future__ import annotations

import json
from urllib.parse import unquote

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import TOPIC, characteristic, engine, events, message, reading

from monitor import messages
from monitor.messages import AlertEvent
from monitor.plan import SourcePlan

values = st.text(st.characters(codec="utf-8"), min_size=1, max_size=20)


def raised() -> AlertEvent:
    plan = characteristic(unit="N·m", title='Torque "cap"\n')
    (event,) = events(engine(plan).fold(reading(1 / 3 + 9, 0, 7)))
    return event


def test_a_message_is_read_back_as_it_was_to_the_last_digit() -> None:
    event = raised()
    assert json.loads(messages.encode(event)) == event
    assert event["statistic"]["value"] == 1 / 3 + 9


def test_fields_stand_in_their_declared_order() -> None:
    declared = [name for name in AlertEvent.__annotations__ if name != "published"]
    assert list(json.loads(messages.encode(raised()))) == declared


def test_published_follows_time_and_changes_nothing_else() -> None:
    event = raised()
    at = "2026-03-02T06:41:12.350Z"
    stamped = json.loads(messages.published(messages.encode(event), at))
    names = list(event)
    names.insert(names.index("time") + 1, "published")
    assert list(stamped) == names
    assert stamped.pop("published") == at
    assert stamped == event


@pytest.mark.parametrize(
    ("stream", "path"),
    [
        ((), "net-weight"),
        ((("head", "4"), ("lane", "1")), "net-weight/4/1"),
        ((("head", "a/b"),), "net-weight/a%2Fb"),
        ((("head", "+"),), "net-weight/%2B"),
        ((("head", "#"),), "net-weight/%23"),
        ((("head", "50 %"),), "net-weight/50%20%25"),
        ((("head", "ü"),), "net-weight/%C3%BC"),
        ((("head", "\0"),), "net-weight/%00"),
    ],
)
def test_stream_values_are_percent_encoded_levels(
    stream: tuple[tuple[str, str], ...], path: str
) -> None:
    assert messages.path("net-weight", stream) == path


@given(st.lists(values, max_size=4))
def test_a_path_tells_its_stream(texts: list[str]) -> None:
    stream = tuple((f"key-{index}", value) for index, value in enumerate(texts))
    levels = messages.path("net-weight", stream).split("/")
    assert [unquote(level) for level in levels] == ["net-weight", *texts]
    assert not set("+#\0") & set("".join(levels))


@given(st.lists(values, min_size=1, max_size=3))
def test_whatever_a_gauge_calls_its_streams_the_event_is_json(texts: list[str]) -> None:
    keys = [f"key-{index}" for index in range(len(texts))]
    source = SourcePlan(
        TOPIC, (), "json", value=("v",), stream=tuple((key, (key,)) for key in keys)
    )
    entry = message({"v": 9} | dict(zip(keys, texts, strict=True)))
    (event,) = events(engine(characteristic(source=source)).fold(entry))
    assert json.loads(messages.encode(event))["stream"] == dict(zip(keys, texts, strict=True))
