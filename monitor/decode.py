"""From a message to a reading of a stream, or to the reason why not.

Knows a source's pointers, numbers and times, and the order of the checks. Must not know what was
read before: repeats and lateness are judged against the stream.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import NamedTuple

from monitor import numbers, times
from monitor.plan import SourcePlan
from monitor.pointers import MISSING, lookup

MAX_PAYLOAD = 256 * 1024
FUTURE = 5 * 60 * times.SECOND
_MILLISECONDS_FROM = 1e11
_MAX_STREAM_VALUE = 256
_OLDEST = -62_135_596_800 * times.SECOND  # 0001-01-01T00:00Z: ISO 8601 writes none before it
_MAX_SEQUENCE = 2**63


class Found(NamedTuple):
    """What a message says before it is judged; ``keys`` are stream values in their keys' order."""

    keys: tuple[str, ...]
    value: object
    at: object


class Decoder:
    """Reads the messages of one source."""

    __slots__ = ("_captured", "_sequence", "_source", "_stream", "keys", "number", "timed")

    def __init__(self, source: SourcePlan) -> None:
        self._source = source
        self.keys = tuple(sorted([k for _, k in source.captures] + [k for k, _ in source.stream]))
        self.number = source.payload == "number"
        self.timed = source.time is not None
        self._sequence = source.sequence.pointer if source.sequence else None
        captured = {key: index for index, key in source.captures}
        within = dict(source.stream)
        self._captured = tuple(captured.get(key) for key in self.keys)
        self._stream = tuple(within.get(key, ()) for key in self.keys)

    def levels(self, topic: str) -> tuple[str | None, ...]:
        """The values a topic fixes, in the order of ``keys``; None: the payload's to say."""
        parts = topic.split("/")
        return tuple(None if at is None else parts[at] for at in self._captured)

    def find(self, document: object, levels: tuple[str | None, ...]) -> Found | str:
        """What the document says, or ``not-used`` or ``no-stream``."""
        source = self._source
        for pointer, allowed in source.use_if:
            if not _among(lookup(document, pointer), allowed):
                return "not-used"
        keys = []
        for level, pointer in zip(levels, self._stream, strict=True):
            key = _stream_value(lookup(document, pointer) if level is None else level)
            if key is None:
                return "no-stream"
            keys.append(key)
        at = MISSING if source.time is None else lookup(document, source.time)
        return Found(tuple(keys), lookup(document, source.value), at)

    def sequence(self, document: object) -> object:
        """The sequence number as the document has it; ``MISSING`` where none is configured."""
        return MISSING if self._sequence is None else lookup(document, self._sequence)

    def row(self, columns: Mapping[str, str]) -> tuple[str, ...] | None:
        """The stream values of a table row, or None where one is missing."""
        keys = [_stream_value(columns.get(key)) for key in self.keys]
        known = tuple(key for key in keys if key is not None)
        return known if len(known) == len(keys) else None

    def judge_value(self, value: object) -> float | str:
        """The value as a plausible float, or the reason it cannot be used."""
        if value is MISSING or value is None:
            return "no-value"
        result = numbers.number(value)
        source = self._source
        if isinstance(result, float) and not (
            source.plausible_lower <= result <= source.plausible_upper
        ):
            return "implausible"
        return result


def judge_time(at: object, arrival: int) -> int | str:
    """The event time in microseconds, or ``no-time``, ``bad-time`` or ``future``."""
    if at is MISSING or at is None:
        return "no-time"
    try:
        moment = _moment(at)
    except (ValueError, OverflowError):
        return "bad-time"
    if moment - arrival > FUTURE:
        return "future"
    return moment if moment >= _OLDEST else "bad-time"


def judge_sequence(sequence: object) -> int | None:
    """The sequence number, or None where the message lacks a usable one."""
    if isinstance(sequence, str):
        sequence = _number(sequence)
    if isinstance(sequence, float) and sequence.is_integer():
        sequence = int(sequence)
    if not isinstance(sequence, int) or isinstance(sequence, bool):
        return None
    return sequence if 0 <= sequence < _MAX_SEQUENCE else None


def _number(text: str) -> int | float | str:
    """The number that ``text`` writes in JSON grammar, or the text itself."""
    if not numbers.NUMBER.fullmatch(text):
        return text
    return int(text) if text.isdigit() and len(text) < 20 else float(text)


def _moment(at: object) -> int:
    if isinstance(at, str):
        at = _number(at)
        if isinstance(at, str):
            return times.parse_iso_time(at)
    if isinstance(at, bool) or not isinstance(at, int | float):
        raise ValueError("neither a text nor a number")
    # round() refuses what is not finite, with the errors that the caller awaits.
    return round(at * (1_000 if abs(at) >= _MILLISECONDS_FROM else times.SECOND))


def _stream_value(value: object) -> str | None:
    if isinstance(value, str):
        text = value
    elif isinstance(value, bool):
        return None
    elif isinstance(value, float) and math.isfinite(value):
        # 4.0 and 4 are one number in JSON, so they are one stream.
        text = str(int(value)) if value.is_integer() and abs(value) < 1e15 else repr(value)
    elif isinstance(value, int) and abs(value) < _MAX_SEQUENCE:
        text = str(value)
    else:
        return None
    if not 0 < len(text) <= _MAX_STREAM_VALUE:
        return None
    if not text.isascii():
        try:
            text.encode()
        except UnicodeEncodeError:  # half of a surrogate pair: no topic can carry it
            return None
    return text


def _among(value: object, allowed: tuple[object, ...]) -> bool:
    # True == 1 in Python, not in JSON.
    return any(
        value == candidate and isinstance(value, bool) == isinstance(candidate, bool)
        for candidate in allowed
    )
