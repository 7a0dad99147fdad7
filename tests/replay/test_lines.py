"""Recorded messages as entries."""

from __future__ import annotations

import io
import json
from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor import numbers
from monitor.commandline import CommandError
from monitor.decode import MAX_PAYLOAD
from monitor.entries import (
    Connected,
    Disconnected,
    Entry,
    Message,
    Parsed,
    Started,
    State,
    Tick,
)
from replay.lines import ControlError, LineError, decode_line, read_lines

MOMENT = 1_772_433_672_350_000  # 2026-03-02T06:41:12.350Z, by `date -u -d @1772433672`


def read(*lines: bytes) -> tuple[list[tuple[int, Entry | State]], list[tuple[int, str]]]:
    wrong: list[tuple[int, str]] = []
    file = io.BytesIO(b"".join(line if line.endswith(b"\n") else line + b"\n" for line in lines))
    chunks = read_lines("a.jsonl", file, lambda number, why: wrong.append((number, why)))
    entries = [
        (number, entry)
        for first, held in chunks
        for number, entry in enumerate(held, first)
        if entry is not None
    ]
    return entries, wrong


@pytest.mark.parametrize(
    "time",
    [
        b'"2026-03-02T06:41:12.350Z"',
        b'"2026-03-02T07:41:12.350+01:00"',
        b"1772433672.35",
        b"1772433672350",
        b'"1772433672350"',
    ],
)
def test_arrival_is_iso_or_epoch(time: bytes) -> None:
    line = b'{"time": %s, "topic": "a", "payload": 1}' % time
    assert decode_line(line) == Parsed(MOMENT, "a", 1)


def test_names_may_stand_in_any_order_and_others_are_ignored() -> None:
    line = b'{"payload": {"net": 1}, "note": "x", "topic": "a", "time": 1772433672.35}\r\n'
    assert decode_line(line) == Parsed(MOMENT, "a", {"net": 1})


def test_retain_and_qos() -> None:
    line = b'{"time":1772433672.35,"topic":"a","retain":true,"qos":0,"payload":1}'
    assert decode_line(line) == Message(MOMENT, "a", b"1", True, 0)


def test_flags_that_say_nothing_make_no_difference() -> None:
    line = b'{"time":1772433672.35,"topic":"a","retain":false,"qos":1,"payload":[1]}'
    assert decode_line(line) == Parsed(MOMENT, "a", [1])


def test_an_oversized_payload_keeps_its_size() -> None:
    line = b'{"time":1772433672.35,"topic":"a","payload":"%s"}'
    just = b"x" * (MAX_PAYLOAD - 2)
    entries, _ = read(line % just, line % (just + b"x"))
    assert entries == [
        (1, Parsed(MOMENT, "a", just.decode())),
        (2, Message(MOMENT, "a", b'"%sx"' % just)),
    ]


def test_a_payload_too_deep_to_be_written_again_as_it_was_read_is_written_all_the_same() -> None:
    payload = b"[" * 300 + b"]" * 300
    line = b'{"time":1772433672.35,"topic":"a","payload":%s}' % payload
    assert read(line) == ([(1, Message(MOMENT, "a", payload))], [])


def test_base64() -> None:
    line = b'{"time":1772433672.35,"topic":"a","payload_base64":"/w=="}'
    assert decode_line(line) == Message(MOMENT, "a", b"\xff")


@pytest.mark.parametrize("number", ["NaN", "-Infinity", "1e999", "9" * 400, "9" * 6000])
def test_numbers_that_json_does_not_know_reach_the_engine_as_not_finite(number: str) -> None:
    line = b'{"time":1772433672.35,"topic":"a","payload":{"net":%s}}' % number.encode()
    entry = decode_line(line)
    assert isinstance(entry, Message)
    document = numbers.parse(entry.payload)
    assert isinstance(document, dict)
    assert numbers.number(document["net"]) == "not-finite"


def test_half_a_surrogate_pair_in_a_payload_is_no_harm() -> None:
    line = b'{"time":1772433672.35,"topic":"a","payload":{"note":"\\ud800","net":1}}'
    entry = decode_line(line)
    assert isinstance(entry, Message)
    assert json.loads(entry.payload) == {"note": "\ud800", "net": 1}


def test_control_lines() -> None:
    lines = [
        b'{"time":1772433672.35,"control":"started","version":"0.1.0"}',
        b'{"time":1772433672.35,"control":"connected","session_present":false}',
        b'{"time":1772433672.35,"control":"connected"}',
        b'{"time":1772433672.35,"control":"disconnected"}',
        b'{"time":1772433672.35,"control":"tick"}',
    ]
    assert [decode_line(line) for line in lines] == [
        Started(MOMENT),
        Connected(MOMENT, False),
        Connected(MOMENT, True),
        Disconnected(MOMENT),
        Tick(MOMENT),
    ]


def test_a_control_of_a_later_version_ends_the_play() -> None:
    with pytest.raises(CommandError, match=r'^a\.jsonl:2: control "command" is not built yet$'):
        read(b"\n", b'{"time":1,"control":"command"}')


def test_an_unknown_control_ends_the_play() -> None:
    with pytest.raises(
        CommandError, match=r"^a\.jsonl:1: control 'conected' is unknown: connected, .* or state$"
    ):
        read(b'{"time":1,"control":"conected"}')


@pytest.mark.parametrize(
    ("line", "why"),
    [
        (b"", "not a JSON object"),
        (b"[1]", "not a JSON object"),
        (b'{"time":1,"topic":"a","payload":1', "not a JSON object"),
        (b"\xff\xfe", "not a JSON object"),
        (b"[" * 100_000, "not a JSON object"),
        (b'{"topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":null,"topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":true,"topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":"2026-03-02T06:41:12","topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":NaN,"topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":1e300,"topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":"0001-01-01T00:00:00+14:00","topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":"9999-12-31T23:59:59-14:00","topic":"a","payload":1}', 'no usable "time"'),
        (b'{"time":1,"payload":1}', 'neither "topic" nor "control"'),
        (b'{"time":1,"topic":4,"payload":1}', 'neither "topic" nor "control"'),
        (b'{"time":1,"topic":"\\ud800","payload":1}', '"topic" is no text that MQTT can carry'),
        (b'{"time":1,"topic":"a"}', 'neither "payload" nor "payload_base64"'),
        (b'{"time":1,"topic":"a","payload_base64":"?"}', '"payload_base64" is not base64'),
        (b'{"time":1,"topic":"a","payload":1,"retain":1}', '"retain" is neither'),
        (b'{"time":1,"topic":"a","payload":1,"qos":true}', '"qos" is none of'),
        (b'{"time":1,"topic":"a","payload":1,"qos":3}', '"qos" is none of'),
        (b'{"time":1,"control":"connected","session_present":1}', '"session_present" is neither'),
    ],
)
def test_lines_that_are_no_entry_say_why(line: bytes, why: str) -> None:
    with pytest.raises(LineError) as error:
        decode_line(line)
    assert str(error.value).startswith(why)


def test_they_are_told_with_their_line_and_the_rest_is_read() -> None:
    good = b'{"time":1772433672.35,"topic":"a","payload":1}\n'
    entries, wrong = read(good, b"\n", b"half a li", good)
    assert [number for number, _ in entries] == [1, 4]
    assert wrong == [(3, "not a JSON object")]


@given(st.binary(max_size=200))
def test_no_bytes_crash_it(line: bytes) -> None:
    with suppress(LineError, ControlError):
        decode_line(line)


values = st.one_of(
    st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=9), st.lists(st.floats())
)
names = st.sampled_from(
    ["time", "topic", "payload", "payload_base64", "control", "retain", "qos", "session_present"]
)


@given(st.dictionaries(names, values))
def test_no_object_crashes_it(fields: dict[str, object]) -> None:
    with suppress(LineError, ControlError):
        decode_line(json.dumps(fields).encode())


times = st.sampled_from(
    ["2026-03-02T06:41:12.350Z", "2026-03-02T06:41:12", "0001-01-01T00:00:00+14:00", 1.5e9, None]
)


@given(
    st.fixed_dictionaries(
        {"time": times, "topic": st.text(max_size=5) | values, "payload": values},
        optional={"retain": st.booleans(), "qos": st.integers(0, 3)},
    )
)
def test_plain_lines_are_read_as_all_others_are(fields: dict[str, object]) -> None:
    line = json.dumps(fields).encode()
    expected: tuple[list[tuple[int, Entry]], list[tuple[int, str]]]
    try:
        expected = [(1, decode_line(line))], []
    except LineError as error:
        expected = [], [(1, str(error))]
    assert read(line) == expected
