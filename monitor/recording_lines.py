"""Journal entries as the lines of a recording (JSON Lines), for whoever writes one.

Knows the line format. Must not know where entries come from or how recordings are read again.
"""

from __future__ import annotations

import base64
from collections.abc import Iterable
from typing import IO

import orjson

from monitor import plan_json
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Message,
    Recorded,
    Started,
    State,
    Tick,
)
from monitor.plan import Plan
from monitor.times import format_time


def encode_line(entry: Recorded | State) -> bytes:
    """One entry as a line, newline included; reading it gives an equal entry."""
    match entry:
        case Message():
            return _message_line(entry)
        case Connected():
            return _control_line(entry.time, "connected", session_present=entry.session_present)
        case Disconnected():
            return _control_line(entry.time, "disconnected")
        case Started():
            return _control_line(entry.time, "started")
        case Configured():
            return _control_line(entry.time, "config", plan=_json(entry.plan))
        case Tick():
            return _control_line(entry.time, "tick")
        case State(time, plan, engine, streams):
            return _control_line(
                time, "state", plan=_json(plan), engine=engine, streams=list(streams)
            )


def write_jsonl(file: IO[bytes], entries: Iterable[Recorded | State]) -> int:
    """Write entries to an open file (``files.replacing`` opens one); returns how many."""
    count = 0
    for entry in entries:
        file.write(encode_line(entry))
        count += 1
    return count


def _json(plan: Plan) -> object:
    return orjson.loads(plan_json.encode(plan))


def _message_line(message: Message) -> bytes:
    flags = b""
    if message.retain:
        flags += b',"retain":true'
    if message.qos != 1:
        flags += b',"qos":%d' % message.qos
    head = b'{"time":"%s","topic":%s%s' % (
        format_time(message.time).encode(),
        orjson.dumps(message.topic),
        flags,
    )
    line = b'%s,"payload":%s}\n' % (head, message.payload)
    if _survives(line, message.payload):
        return line
    return b'%s,"payload_base64":"%s"}\n' % (head, base64.b64encode(message.payload))


def _survives(line: bytes, payload: bytes) -> bool:
    """Whether a reader who parses the line and writes its payload again has the same bytes.

    Compared as bytes, so a payload that closes the line early cannot pass: what orjson writes is
    one JSON value.
    """
    try:
        return orjson.dumps(orjson.loads(line)["payload"]) == payload
    except (orjson.JSONDecodeError, orjson.JSONEncodeError):
        return False


def _control_line(time: int, control: str, **fields: object) -> bytes:
    line = {"time": format_time(time), "control": control, **fields}
    return orjson.dumps(line, option=orjson.OPT_APPEND_NEWLINE)
