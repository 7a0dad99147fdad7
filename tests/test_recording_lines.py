"""Lines of a recording: what is written, and that reading gives it back."""

from __future__ import annotations

import base64
import io
import json

import journals
import orjson
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Entry,
    Message,
    Parsed,
    Recorded,
    Started,
    State,
    Tick,
)
from monitor.plan import Plan
from monitor.recording_lines import encode_line, write_jsonl
from replay.lines import decode_line

MOMENT = 1_772_433_672_350_000  # 2026-03-02T06:41:12.350Z, by `date -u -d @1772433672`

moments = st.integers(-62_135_596_800_000_000, 253_370_764_800_000_000)
topics = st.text(st.characters(exclude_categories=["Cs"]), min_size=1, max_size=40)
documents = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(), inner, max_size=4),
    max_leaves=12,
)
payloads = st.one_of(
    st.binary(max_size=80),
    documents.map(lambda document: json.dumps(document).encode()),
    documents.map(lambda document: json.dumps(document, separators=(",", ":")).encode()),
)
entries: st.SearchStrategy[Recorded] = st.one_of(
    st.builds(Message, moments, topics, payloads, st.booleans(), st.integers(0, 2)),
    st.builds(Started, moments),
    st.builds(Connected, moments, st.booleans()),
    st.builds(Disconnected, moments),
    st.builds(Tick, moments),
    st.builds(Configured, moments, st.sampled_from([journals.PLAN, Plan(())])),
)


def read(line: bytes) -> Entry | State:
    """The entry; one that was parsed with its line as the message it was, to the byte."""
    entry = decode_line(line)
    if isinstance(entry, Parsed):
        return Message(entry.time, entry.topic, orjson.dumps(entry.document))
    return entry


@given(entries)
def test_a_line_that_is_read_gives_the_entry_back(entry: Recorded) -> None:
    line = encode_line(entry)
    assert line.endswith(b"\n")
    assert line.count(b"\n") == 1
    assert read(line) == entry


@given(st.builds(Message, moments, topics, payloads))
def test_a_payload_stands_as_json_only_where_any_reader_gets_it_back(message: Message) -> None:
    fields = json.loads(encode_line(message))
    if "payload" in fields:
        # Python's own JSON as the other reader: the same value as in the payload itself.
        assert fields["payload"] == json.loads(message.payload)
        assert "payload_base64" not in fields
    else:
        assert base64.b64decode(fields["payload_base64"]) == message.payload


@pytest.mark.parametrize(
    "payload",
    [b'{"t":"2026-03-02T06:41:12.300Z","net":341.2,"head":4}', b"2.05", b'"text"', b"[]", b"null"],
)
def test_compact_json_is_written_as_it_is(payload: bytes) -> None:
    line = encode_line(Message(MOMENT, "plant/a", payload))
    assert line == (
        b'{"time":"2026-03-02T06:41:12.350Z","topic":"plant/a","payload":%s}\n' % payload
    )


@pytest.mark.parametrize(
    "payload",
    [
        b'{"net": 341.2}',  # spaces
        b'{"net":341.20}',  # a trailing zero
        b'{"a":1,"a":2}',  # a name twice
        b'"\\u0041"',  # an escape that is not needed
        b"-0",
        b"NaN",
        b"1e999",
        b"",
        b"\xff\xfe",
        b"1}",
        b'1,"payload":1',  # would close the line's own object well
        b'1,"topic":"other"',
        b"123456789012345678901234567890",
        b"[" * 2000 + b"]" * 2000,
        b'{"a":\n1}',
    ],
)
def test_what_json_would_not_keep_to_the_byte_is_written_as_base64(payload: bytes) -> None:
    message = Message(MOMENT, "plant/a", payload)
    line = encode_line(message)
    assert b"payload_base64" in line
    assert read(line) == message


def test_flags_are_written_only_where_they_say_something() -> None:
    line = encode_line(Message(MOMENT, "a", b"1", retain=True, qos=0))
    assert json.loads(line) == {
        "time": "2026-03-02T06:41:12.350Z",
        "topic": "a",
        "retain": True,
        "qos": 0,
        "payload": 1,
    }


def test_control_lines() -> None:
    file = io.BytesIO()
    count = write_jsonl(
        file,
        [
            Started(MOMENT),
            Connected(MOMENT, False),
            Disconnected(MOMENT + 1_000_000),
            Tick(MOMENT + 2_000_000),
            Configured(MOMENT + 3_000_000, Plan(())),
            State(MOMENT + 4_000_000, Plan(()), {"version": 1}, ({"stream": {}},)),
        ],
    )
    assert count == 6
    assert [json.loads(line) for line in file.getvalue().splitlines()] == [
        {"time": "2026-03-02T06:41:12.350Z", "control": "started"},
        {"time": "2026-03-02T06:41:12.350Z", "control": "connected", "session_present": False},
        {"time": "2026-03-02T06:41:13.350Z", "control": "disconnected"},
        {"time": "2026-03-02T06:41:14.350Z", "control": "tick"},
        {
            "time": "2026-03-02T06:41:15.350Z",
            "control": "config",
            "plan": {"is": "Plan", "characteristics": []},
        },
        {
            "time": "2026-03-02T06:41:16.350Z",
            "control": "state",
            "plan": {"is": "Plan", "characteristics": []},
            "engine": {"version": 1},
            "streams": [{"stream": {}}],
        },
    ]
