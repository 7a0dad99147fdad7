"""Texts, numbers, names, durations, rates, topics and pointers, as types that check themselves.

Knows how each is written. Must not know which key takes which.
"""

from __future__ import annotations

import re
from typing import Annotated, Any

from pydantic import AfterValidator, BeforeValidator, Field

from monitor import filters, pointers, times
from monitor.configuration.sections.base import fault
from monitor.configuration.yamltree import Filled, scalar

_LONGEST = 36_525 * times.DAY  # a hundred years
_RATE = re.compile(r"([0-9]+(?:\.[0-9]+)?)\s*/\s*(s|min|h|d)", re.ASCII)
_SIZE = re.compile(r"([0-9]+(?:\.[0-9]+)?)\s*([kMGT]B)", re.ASCII)
_BYTES = {"kB": 1e3, "MB": 1e6, "GB": 1e9, "TB": 1e12}
_PER = {"s": 1.0, "min": 60.0, "h": 3_600.0, "d": 86_400.0}
LINE = r"^[^\x00-\x1f\x7f]*$"
_NAME = r"^[A-Za-z0-9][A-Za-z0-9_-]*$"


def _typed(value: object) -> object:
    return scalar(value) if isinstance(value, Filled) else value


def _duration(value: object) -> int:
    if type(value) in (int, float):
        raise fault("has no unit", "write it with one, such as 30s or 5min")
    if not isinstance(value, str):
        raise fault("is not a duration", "write 500ms, 30s, 5min, 8h or 14d")
    try:
        duration = times.parse_duration(value)
    except (ValueError, OverflowError):
        raise fault("is not a duration", "write 500ms, 30s, 5min, 8h or 14d") from None
    if duration > _LONGEST:
        raise fault("is more than a hundred years", "write a shorter time")
    return duration


def _size(value: object) -> int:
    found = _SIZE.fullmatch(value.strip()) if isinstance(value, str) else None
    if not found:
        raise fault("is not a size", "write a number of kB, MB, GB or TB, such as 20GB")
    return round(float(found[1]) * _BYTES[found[2]])


def _rate(value: object) -> float:
    found = _RATE.fullmatch(value.strip()) if isinstance(value, str) else None
    rate = float(found[1]) / _PER[found[2]] if found else 0.0
    if not 0.0 < rate <= 1e9:
        raise fault("is not a rate", "write a number above 0 a s, min, h or d, such as 600/min")
    return rate


def _pointer(value: str) -> str:
    try:
        pointers.parse(value)
    except ValueError:
        raise fault(
            "is not a JSON Pointer (RFC 6901)",
            "write / before each key, such as /net or /weights/net",
        ) from None
    return value


def _plain(value: object) -> object:
    if isinstance(value, dict | list) or value in (float("inf"), float("-inf")) or value != value:
        raise fault("is not a text, number, true, false or null", "write such values only")
    return str(value) if isinstance(value, Filled) else value


Line = Annotated[str, Field(min_length=1, pattern=LINE)]
Name = Annotated[
    str,
    Field(pattern=_NAME, max_length=100, description="a name of letters, digits, _ and -"),
]
StreamKey = Annotated[
    str,
    Field(
        pattern=f"^{filters.STREAM_KEY.pattern}$",
        max_length=100,
        description="a name of letters, digits, _ and - that starts with a letter",
    ),
]
Number = Annotated[float, BeforeValidator(_typed), Field(ge=-1e100, le=1e100)]
Positive = Annotated[float, BeforeValidator(_typed), Field(gt=0, ge=1e-100, le=1e100)]
Whole = Annotated[int, BeforeValidator(_typed)]
Flag = Annotated[bool, BeforeValidator(_typed)]
Size = Annotated[int, BeforeValidator(_size)]
"""Bytes, written as ``20GB``."""

Duration = Annotated[int, BeforeValidator(_duration)]
Rate = Annotated[float, BeforeValidator(_rate)]
Pointer = Annotated[str, AfterValidator(_pointer)]
Scalar = Annotated[Any, AfterValidator(_plain)]
