"""From a message to a reading of a stream, or to the reason why not.

Knows a source's pointers, numbers and times, and the order of the checks. Must not know what was
read before: repeats and lateness are judged against the stream.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

from monitor import numbers, times
from monitor.entries import Reading
from monitor.plan import SourcePlan
from monitor.pointers import MISSING, lookup

MAX_PAYLOAD = 256 * 1024
FUTURE = 5 * 60 * times.SECOND
_MILLISECONDS_FROM = 1e11
_MAX_STREAM_VALUE = 256
_OLDEST = -62_135_596_800 * times.SECOND  # 0001-01-01T00:00Z: ISO 8601 writes none before it
_MAX_SEQUENCE = 2**63
_ONE_SPELLING = frozenset({int, str, tuple})
"""Types whose equal values are one stream; the tuple is that of a source whose payload has none."""


Found = tuple[object, object, object, object]
"""(key, value, time, sequence) as a document has them; ``MISSING`` where it does not.

The key tells its stream from others on the same topic: equal keys, equal streams. It is None where
only ``stream_values`` can tell: no stream value, or one that has several spellings.
"""


class Decoder:
    """Reads the messages of one source: what its pointers find, and what may be used of it."""

    __slots__ = (
        "_captured",
        "_lower",
        "_stream",
        "_upper",
        "_use_if",
        "conditional",
        "find",
        "keys",
        "number",
        "timed",
    )

    def __init__(self, source: SourcePlan) -> None:
        self.keys = tuple(sorted([k for _, k in source.captures] + [k for k, _ in source.stream]))
        self.number = source.payload == "number"
        self.timed = source.time is not None
        self._lower, self._upper = source.plausible_lower, source.plausible_upper
        self._use_if = source.use_if
        self.conditional = bool(source.use_if)
        captured = {key: index for index, key in source.captures}
        within = dict(source.stream)
        self._captured = tuple(captured.get(key) for key in self.keys)
        self._stream = tuple(within[key] for key in self.keys if key in within)
        self.find = _finder(source, self._stream)

    def levels(self, topic: str) -> tuple[str | None, ...]:
        """The values a topic fixes, in the order of ``keys``; None: the payload's to say."""
        parts = topic.split("/")
        return tuple(None if at is None else parts[at] for at in self._captured)

    def is_used(self, document: object) -> bool:
        """Whether the document meets ``use_if``."""
        return all(_among(lookup(document, pointer), among) for pointer, among in self._use_if)

    def stream_values(
        self, document: object, levels: tuple[str | None, ...]
    ) -> tuple[str, ...] | None:
        """Stream values in the order of ``keys``; None where one is missing or is none."""
        stream = iter(self._stream)
        return _all_known(
            [
                _stream_value(lookup(document, next(stream)) if level is None else level)
                for level in levels
            ]
        )

    def judge_value(self, value: object) -> float | str:
        """The value as a plausible float, or the reason it cannot be used."""
        if type(value) is float and self._lower <= value <= self._upper:
            return value
        if value is MISSING or value is None:
            return "no-value"
        result = numbers.number(value)
        if isinstance(result, float) and not self._lower <= result <= self._upper:
            return "implausible"
        return result


class RowDecoder(Decoder):
    """Reads the rows of a table for one source: what a message would have said, taken apart."""

    __slots__ = ()

    def __init__(self, source: SourcePlan) -> None:
        super().__init__(source)
        # A table's value may be any text, its time is the event's, and it holds what was used.
        self.number, self.timed, self.conditional = True, True, False
        self.find = self._columns

    def stream_values(
        self, document: object, levels: tuple[str | None, ...]
    ) -> tuple[str, ...] | None:
        """From the stream columns, whichever level or member they come from on the line."""
        assert isinstance(document, Reading)
        return _all_known([_stream_value(document.stream.get(key)) for key in self.keys])

    def _columns(self, document: object) -> Found:
        assert isinstance(document, Reading)
        return None, document.value, document.at, document.sequence


def judge_time(at: object, arrival: int) -> int | str:
    """The event time in microseconds, or ``no-time``, ``bad-time`` or ``future``."""
    if at is MISSING or at is None:
        return "no-time"
    try:
        moment = _moment(at)
    except (ValueError, OverflowError):
        return "bad-time"
    if _OLDEST <= moment <= arrival + FUTURE:
        return moment
    return "future" if moment > arrival else "bad-time"


def judge_sequence(sequence: object) -> int | None:
    """The sequence number, or None where the message lacks a usable one."""
    if type(sequence) is int and 0 <= sequence < _MAX_SEQUENCE:
        return sequence
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
    if type(at) is str:
        # What has a dash after its year is no number.
        at = at if at[4:5] == "-" else _number(at)
        if isinstance(at, str):
            return times.parse_iso_time(at)
    if type(at) is not float and type(at) is not int:
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


def _all_known(values: list[str | None]) -> tuple[str, ...] | None:
    known = tuple(value for value in values if value is not None)
    return known if len(known) == len(values) else None


def _finder(source: SourcePlan, stream: tuple[tuple[str, ...], ...]) -> Callable[[object], Found]:
    """Finds everything at once; by name alone where each place is a member of the document."""
    value, at = source.value, source.time
    sequence = source.sequence.pointer if source.sequence else None

    def anywhere(document: object) -> Found:
        keys = tuple(lookup(document, pointer) for pointer in stream)
        return (
            keys if all(type(key) in _ONE_SPELLING for key in keys) else None,
            lookup(document, value),
            MISSING if at is None else lookup(document, at),
            MISSING if sequence is None else lookup(document, sequence),
        )

    if len(stream) > 1 or any(len(p) != 1 for p in (value, at, sequence, *stream) if p is not None):
        return anywhere
    # A name that no document has finds nothing: the empty tuple is no JSON member.
    names: list[Any] = [p[0] if p else () for p in (*stream, value, at, sequence)]
    *key_names, value_name, at_name, sequence_name = names
    key_name = key_names[0] if key_names else None

    def members(document: object) -> Found:
        if type(document) is not dict:
            return anywhere(document)
        get = document.get
        key = () if key_name is None else get(key_name)
        return (
            key if type(key) in _ONE_SPELLING else None,
            get(value_name, MISSING),
            get(at_name, MISSING),
            get(sequence_name, MISSING),
        )

    return members


def _among(value: object, allowed: tuple[object, ...]) -> bool:
    if type(value) is str:
        return value in allowed
    # True == 1 in Python, not in JSON.
    return any(
        value == candidate and isinstance(value, bool) == isinstance(candidate, bool)
        for candidate in allowed
    )
