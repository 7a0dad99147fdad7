"""A payload that was parsed with its line does all that the same payload's text does."""

from __future__ import annotations

import json
from collections.abc import Iterable
from dataclasses import replace

import orjson
import plans
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.decode import MAX_PAYLOAD
from monitor.entries import Entry, Message, Parsed
from monitor.outputs import Output
from monitor.plan import SourcePlan
from monitor.stream import Counts
from replay.lines import decode_line

HEADS = replace(plans.GAUGE, stream=(("head", ("h",)),), use_if=((("u",), (True, "yes", 1)),))
BARE = SourcePlan("line/bare", (), "number")

scalars = st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5)
documents = st.recursive(
    scalars, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(), inner)
)
usual = st.fixed_dictionaries(
    {
        "v": st.floats(-9, 9) | scalars,
        "t": st.integers(0, 20).map(lambda s: plans.START / plans.SECOND + s) | scalars,
        "n": st.integers(0, 20) | scalars,
        "h": st.sampled_from([1, 1.0, "1", 2, True]) | scalars,
        "u": st.sampled_from([True, 1, "yes"]) | scalars,
    },
    optional={"more": documents},
)
topics = st.sampled_from([plans.TOPIC, BARE.topic, "line/other"])


def outcome(entries: Iterable[Entry]) -> tuple[list[Output], Counts]:
    engine = plans.engine(
        plans.characteristic(plans.shewhart(), source=HEADS, size=2),
        plans.characteristic(plans.shewhart(width=1), name="bare", source=BARE),
    )
    return plans.fold(engine, entries), engine.counts


def line(time: int, topic: str, payload: bytes) -> bytes:
    return b'{"time":%d.%06d,"topic":"%s","payload":%s}' % (
        *divmod(time, plans.SECOND),
        topic.encode(),
        payload,
    )


@given(st.lists(st.tuples(topics, usual | documents | st.floats(-9, 9)), max_size=12))
def test_equal_outputs_and_counts(said: list[tuple[str, object]]) -> None:
    messages = [
        Message(plans.START + i * plans.SECOND, topic, json.dumps(document).encode())
        for i, (topic, document) in enumerate(said)
    ]
    read = [decode_line(line(m.time, m.topic, m.payload)) for m in messages]
    written = [
        Message(e.time, e.topic, orjson.dumps(e.document)) if isinstance(e, Parsed) else e
        for e in read
    ]
    assert outcome(read) == outcome(written)
    assert outcome(read)[1] == outcome(messages)[1]  # set aside, these are shown with their spaces


def test_what_was_set_aside_is_shown_as_its_text() -> None:
    payload = b'{"v":"n/a","t":1.5,"deep":[[{"a":[null,true]}]]}'
    entry = decode_line(line(plans.START, "line/other", payload))
    assert isinstance(entry, Parsed)
    assert plans.reasons(outcome([entry])[0]) == ["no-topic"]
    assert outcome([entry]) == outcome([Message(plans.START, "line/other", payload)])


@pytest.mark.parametrize(
    ("size", "reason"), [(MAX_PAYLOAD, "no-topic"), (MAX_PAYLOAD + 1, "oversized")]
)
def test_what_is_too_large_is_so_in_a_recording_too(size: int, reason: str) -> None:
    payload = b'"%s"' % (b"x" * (size - 2))
    entry = decode_line(line(plans.START, "line/other", payload))
    assert plans.reasons(outcome([entry])[0]) == [reason]
    assert outcome([entry]) == outcome([Message(plans.START, "line/other", payload)])
