"""From a message to a reading of a stream, or to the reason why not.

Knows a source's pointers, numbers and times, and the order of the checks. Must not know what was
read before: repeats and lateness are judged against the stream.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from monitor import numbers, times
from monitor.plan import SourcePlan
from monitor.pointers import MISSING, getter

MAX_PAYLOAD = 256 * 1024
FUTURE = 5 * 60 * times.SECOND
_MILLISECONDS_FROM = 1e11
_MAX_STREAM_VALUE = 256
_OLDEST = -62_135_596_800 * times.SECOND  # 0001-01-01T00:00Z: ISO 8601 writes none before it
_MAX_SEQUENCE = 2**63


class Decoder:
    """Reads the messages of one source: what its pointers find, and what may be used of it.

    ``value``, ``at`` and ``sequence`` look into a parsed document; ``MISSING`` where the source has
    no such pointer, or the document no such place.
    """

    __slots__ = (
        "_captured",
        "_lower",
        "_stream",
        "_upper",
        "_use_if",
        "at",
        "keys",
        "number",
        "sequence",
        "timed",
        "value",
    )

    def __init__(self, source: SourcePlan) -> None:
        self.keys = tuple(sorted([k for _, k in source.captures] + [k for k, _ in source.stream]))
        self.number = source.payload == "number"
        self.timed = source.time is not None
        self.value = getter(source.value)
        self.at = _missing if source.time is None else getter(source.time)
        self.sequence = _missing if source.sequence is None else getter(source.sequence.pointer)
        self._lower, self._upper = source.plausible_lower, source.plausible_upper
        self._use_if = tuple((getter(pointer), allowed) for pointer, allowed in source.use_if)
        captured = {key: index for index, key in source.captures}
        within = dict(source.stream)
        self._captured = tuple(captured.get(key) for key in self.keys)
        self._stream = tuple(getter(within[key]) for key in self.keys if key in within)

    def levels(self, topic: str) -> tuple[str | None, ...]:
        """The values a topic fixes, in the order of ``keys``; None: the payload's to say."""
        parts = topic.split("/")
        return tuple(None if at is None else parts[at] for at in self._captured)

    def is_used(self, document: object) -> bool:
        """Whether the document meets ``use_if``."""
        for get, allowed in self._use_if:
            value = get(document)
            if not (value in allowed if type(value) is str else _among(value, allowed)):
                return False
        return True

    def quick_key(self, document: object) -> object:
        """What tells the document's stream from others on its topic, for looking it up again.

        None where it takes ``stream_values`` to tell: only whole numbers and texts are sure to be
        equal when their streams are.
        """
        stream = self._stream
        if len(stream) == 1:
            value = stream[0](document)
            return value if type(value) is int or type(value) is str else None
        values = tuple(get(document) for get in stream)
        return values if all(type(v) is int or type(v) is str for v in values) else None

    def stream_values(
        self, document: object, levels: tuple[str | None, ...]
    ) -> tuple[str, ...] | None:
        """Stream values in the order of ``keys``; None where one is missing or is none."""
        stream = iter(self._stream)
        return _all_known(
            [_stream_value(next(stream)(document) if level is None else level) for level in levels]
        )

    def row(self, columns: Mapping[str, str]) -> tuple[str, ...] | None:
        """The stream values of a table row, or None where one is missing."""
        return _all_known([_stream_value(columns.get(key)) for key in self.keys])

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
    if isinstance(at, str):
        if at[4:5] != "-":  # what has a dash after its year is no number
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


def _all_known(values: list[str | None]) -> tuple[str, ...] | None:
    known = tuple(value for value in values if value is not None)
    return known if len(known) == len(values) else None


def _missing(document: object) -> object:
    return MISSING


def _among(value: object, allowed: tuple[object, ...]) -> bool:
    # True == 1 in Python, not in JSON.
    return any(
        value == candidate and isinstance(value, bool) == isinstance(candidate, bool)
        for candidate in allowed
    )
