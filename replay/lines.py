"""Recorded MQTT messages, one JSON object a line, as journal entries.

Knows the line format (``monitor.recording_lines`` writes it). Must not know files or plans: what a
payload means is the engine's to judge.
"""

from __future__ import annotations

import base64
import json
from collections.abc import Callable, Iterable, Iterator
from typing import Any

import orjson

from monitor import numbers, times
from monitor.commandline import CommandError
from monitor.entries import Connected, Disconnected, Entry, Message, Started
from replay.moments import FIRST, LAST, arrival

OnUnreadable = Callable[[int, str], None]
"""Told the number of a line that is no entry, and what is wrong with it."""

_LATER = ("tick", "config", "command", "state")


class LineError(ValueError):
    """The line is no entry; the text says why."""


class ControlError(ValueError):
    """The line would move the engine in a way this version does not know; the text says how."""


def read_lines(
    name: str, file: Iterable[bytes], unreadable: OnUnreadable
) -> Iterator[tuple[int, Entry]]:
    """Line numbers from 1, and entries, of the file that people know as ``name``.

    Raises CommandError at a control line that cannot be followed: leaving it out would give other
    alerts than the line gave.
    """
    loads, dumps, parse_iso_time = orjson.loads, orjson.dumps, times.parse_iso_time
    for number, line in enumerate(file, 1):
        # The plain line, by far the most frequent, without a call or a question too many; whatever
        # is unusual about one is left to ``decode_line``, which would say the same of a plain one.
        try:
            document = loads(line)
            time = parse_iso_time(document["time"])
            topic, payload = document["topic"], dumps(document["payload"])
            plain = topic.isascii() and len(document) == 3 and FIRST <= time <= LAST
        except (ValueError, KeyError, TypeError, AttributeError):
            plain = False
        if plain:
            yield number, Message(time, topic, payload)
            continue
        try:
            yield number, decode_line(line)
        except LineError as error:
            if not line.isspace():
                unreadable(number, str(error))
        except ControlError as error:
            raise CommandError(f"{name}:{number}: {error}") from None


def decode_line(line: bytes) -> Entry:
    """The entry that a line holds. Raises LineError or ControlError."""
    write: Callable[[object], bytes] = orjson.dumps
    try:
        document: Any = orjson.loads(line)
    except orjson.JSONDecodeError:
        # NaN, 1e999 or half a surrogate pair: still a line, and the payload's to answer for.
        document = numbers.parse(line)
        write = _dumps
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
    if "payload" in document:
        try:
            payload = write(document["payload"])
        except TypeError:  # nested deeper than orjson writes
            payload = _dumps(document["payload"])
    else:
        payload = _from_base64(document.get("payload_base64"))
    if len(document) == 3:
        return Message(time, topic, payload)
    return Message(time, topic, payload, *_flags(document))


def _check_topic(topic: str) -> None:
    try:
        topic.encode()
    except UnicodeEncodeError:  # half of a surrogate pair
        raise LineError('"topic" is no text that MQTT can carry') from None


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


def _control(time: int, document: dict[str, object]) -> Entry:
    control = document["control"]
    if control == "started":
        return Started(time)
    if control == "disconnected":
        return Disconnected(time)
    if control == "connected":
        present = document.get("session_present", True)
        if type(present) is not bool:
            raise LineError('"session_present" is neither true nor false')
        return Connected(time, present)
    if control in _LATER:
        raise ControlError(f'control "{control}" is not built yet')
    raise ControlError(f"control {control!r} is unknown: connected, disconnected or started")
