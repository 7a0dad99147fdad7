"""Recorded MQTT messages, one JSON object a line, as journal entries.

Knows the line format (``monitor.recording_lines`` writes it). Must not know files or plans: what a
payload means is the engine's to judge.
"""

from __future__ import annotations

import base64
import json
from collections.abc import Callable, Iterator
from datetime import datetime, timedelta
from typing import IO, Any

import orjson

from monitor import numbers, plan_json
from monitor.commandline import CommandError
from monitor.decode import MAX_PAYLOAD
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Entry,
    Message,
    Parsed,
    Started,
    State,
    Tick,
)
from monitor.plan import Plan
from monitor.times import EPOCH
from replay.moments import FIRST, LAST, arrival

OnUnreadable = Callable[[int, str], None]
"""Told the number of a line that is no entry, and what is wrong with it."""

_LATER = ("command",)
_CHUNK = 1 << 16  # bytes
_MICROSECOND = timedelta(microseconds=1)

_SHORT = 512
"""In so few bytes no payload is too large, or nested too deeply for orjson to write it again."""


class LineError(ValueError):
    """The line is no entry; the text says why."""


class ControlError(ValueError):
    """The line would move the engine in a way this version does not know; the text says how."""


def read_lines(
    name: str, file: IO[bytes], unreadable: OnUnreadable
) -> Iterator[tuple[int, list[Entry | State | None]]]:
    """Chunks of the file that people know as ``name``: the number of the first line, from 1, and
    what each line holds, None where it is no entry.

    Raises CommandError at a control line that cannot be followed: leaving it out would give other
    alerts than the line gave.
    """
    loads, fromisoformat = orjson.loads, datetime.fromisoformat
    first = 1
    while lines := file.readlines(_CHUNK):
        entries: list[Entry | State | None] = []
        append = entries.append
        for number, line in enumerate(lines, first):
            # The plain line, by far the most frequent, without a call or a question too many;
            # whatever is unusual about one is left to ``decode_line``, which would say the same of
            # a plain one.
            try:
                document = loads(line)
                stamp = document["time"]
                if type(stamp) is str:
                    time: Any = (fromisoformat(stamp) - EPOCH) // _MICROSECOND
                else:
                    time = arrival(stamp)
                topic, payload = document["topic"], document["payload"]
                if (
                    len(document) == 3
                    and len(line) < _SHORT
                    and topic.isascii()
                    and FIRST <= time <= LAST
                ):
                    append(Parsed(time, topic, payload))
                    continue
            except (ValueError, KeyError, TypeError, AttributeError):
                pass
            try:
                append(decode_line(line))
            except LineError as error:
                append(None)
                if not line.isspace():
                    unreadable(number, str(error))
            except ControlError as error:
                raise CommandError(f"{name}:{number}: {error}") from None
        yield first, entries
        first += len(lines)


def decode_line(line: bytes) -> Entry | State:
    """The entry that a line holds. Raises LineError or ControlError."""
    try:
        document: Any = orjson.loads(line)
        strict = True
    except orjson.JSONDecodeError:
        # NaN, 1e999 or half a surrogate pair: still a line, and the payload's to answer for.
        document = numbers.parse(line)
        strict = False
    if type(document) is not dict:
        raise LineError("not a JSON object")
    time = arrival(document.get("time"))
    if time is None:
        raise LineError('no usable "time": write ISO 8601 with its offset, or an epoch number')
    topic = document.get("topic")
    if type(topic) is not str:
        if "control" in document:
            return _control(time, document)
        raise LineError('neither "topic" nor "control"')
    if not topic.isascii():
        _check_topic(topic)
    retain, qos = _flags(document)
    if "payload" not in document:
        return Message(time, topic, _from_base64(document.get("payload_base64")), retain, qos)
    written = _written(document["payload"]) if strict else None
    if written is None:
        return Message(time, topic, _dumps(document["payload"]), retain, qos)
    if retain or qos != 1 or len(written) > MAX_PAYLOAD:
        return Message(time, topic, written, retain, qos)
    return Parsed(time, topic, document["payload"])


def _check_topic(topic: str) -> None:
    try:
        topic.encode()
    except UnicodeEncodeError:  # half of a surrogate pair
        raise LineError('"topic" is no text that MQTT can carry') from None


def _written(payload: object) -> bytes | None:
    """The payload as compact JSON; None where it is nested deeper than orjson writes."""
    try:
        return orjson.dumps(payload)
    except TypeError:
        return None


def _dumps(payload: object) -> bytes:
    return json.dumps(payload, separators=(",", ":")).encode()


def _from_base64(text: object) -> bytes:
    if type(text) is not str:
        raise LineError('neither "payload" nor "payload_base64"')
    try:
        return base64.b64decode(text, validate=True)
    except ValueError:
        raise LineError('"payload_base64" is not base64') from None


def _flags(document: dict[str, object]) -> tuple[bool, int]:
    retain, qos = document.get("retain", False), document.get("qos", 1)
    if type(retain) is not bool:
        raise LineError('"retain" is neither true nor false')
    if type(qos) is not int or not 0 <= qos <= 2:
        raise LineError('"qos" is none of 0, 1 and 2')
    return retain, qos


def _control(time: int, document: dict[str, object]) -> Entry | State:
    control = document["control"]
    if control == "started":
        return Started(time)
    if control == "disconnected":
        return Disconnected(time)
    if control == "tick":
        return Tick(time)
    if control == "config":
        try:
            return Configured(time, _plan(document))
        except ValueError:
            raise LineError("a configuration of another version") from None
    if control == "state":
        return _state(time, document)
    if control == "connected":
        present = document.get("session_present", True)
        if type(present) is not bool:
            raise LineError('"session_present" is neither true nor false')
        return Connected(time, present)
    if control in _LATER:
        raise ControlError(f'control "{control}" is not built yet')
    known = "connected, disconnected, started, tick, config or state"
    raise ControlError(f"control {control!r} is unknown: {known}")


def _state(time: int, document: dict[str, object]) -> State:
    engine, streams = document.get("engine"), document.get("streams")
    try:
        plan = _plan(document)
    except ValueError:
        plan = None
    if plan is None or type(engine) is not dict or type(streams) is not list:
        raise ControlError('a "state" of another version: let that version play it')
    return State(time, plan, engine, tuple(streams))


def _plan(document: dict[str, object]) -> Plan:
    return plan_json.decode(orjson.dumps(document.get("plan")))
