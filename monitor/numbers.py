"""JSON texts and numbers as gauges send them: strict where it matters, lenient where harmless.

Knows JSON. Must not know topics, streams or plausibility.
"""

from __future__ import annotations

import json
import math
import re
from typing import Final

import orjson

NOT_JSON: Final = object()
"""What ``parse`` gives for bytes that are no JSON text."""

NUMBER = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?", re.ASCII)


def parse(payload: bytes) -> object:
    """The document in ``payload``, or ``NOT_JSON``.

    orjson refuses what Python's own module reads: NaN and Infinity, 1e999, integers of hundreds of
    digits. Those come back as floats that are not finite, so that the reason given is the right one
    and a field nobody asked for does no harm.
    """
    try:
        return orjson.loads(payload)
    except orjson.JSONDecodeError:
        try:
            return json.loads(payload.decode("utf-8"), parse_int=_integer)
        except (ValueError, RecursionError):
            return NOT_JSON


def text(document: object) -> bytes:
    """The text of a parsed document, for showing it."""
    try:
        return orjson.dumps(document)
    except TypeError:  # half a surrogate pair, 65 bits, or nested deeper than orjson writes
        try:
            return repr(document).encode(errors="replace")
        except RecursionError:
            return b"[[[..."


def number(value: object) -> float | str:
    """``value`` as a finite float, or the reason it is none: ``not-a-number`` or ``not-finite``.

    A number is a JSON number or a string in JSON number grammar (RFC 8259, section 6).
    """
    if isinstance(value, float):
        result = value
    elif isinstance(value, int) and not isinstance(value, bool):
        try:
            result = float(value)
        except OverflowError:
            return "not-finite"
    elif isinstance(value, str) and NUMBER.fullmatch(value):
        result = float(value)
    else:
        return "not-a-number"
    return result if math.isfinite(result) else "not-finite"


def _integer(text: str) -> int | float:
    # int() refuses more than some 4,300 digits; no gauge counts that far.
    return int(text) if len(text) <= 40 else float(text)
