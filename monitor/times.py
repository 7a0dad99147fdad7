"""Instants and durations: integer microseconds inside, ISO 8601 outside.

Knows how people and gauges write times. Must not know what time it is now.
"""

from __future__ import annotations

import re
from datetime import UTC, datetime, timedelta

SECOND = 1_000_000
DAY = 86_400 * SECOND
EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
MICROSECOND = timedelta(microseconds=1)

_UNITS = {
    "us": 1,
    "ms": 1_000,
    "s": SECOND,
    "min": 60 * SECOND,
    "h": 3_600 * SECOND,
    "d": DAY,
    "y": 365 * DAY,
}
_SHORT = re.compile(r"(\d+(?:\.\d+)?)\s*(us|ms|s|min|h|d|y)", re.ASCII)
_ISO = re.compile(
    r"P(?:(\d+)W)?(?:(\d+)D)?(?:T(?=\d)(?:(\d+)H)?(?:(\d+)M)?(?:(\d+(?:\.\d+)?)S)?)?", re.ASCII
)


def parse_duration(text: str) -> int:
    """Microseconds in ``30s``, ``5min``, ``8h``, ``14d`` or an ISO 8601 duration of fixed length.

    Raises ValueError with a sentence a person can act on. ISO years and months are refused: their
    length depends on the calendar. ``3y`` is 3 · 365 days.
    """
    short = _SHORT.fullmatch(text.strip())
    if short:
        return round(float(short[1]) * _UNITS[short[2]])
    iso = _ISO.fullmatch(text.strip())
    if iso and any(iso.groups()):
        weeks, days, hours, minutes, seconds = (float(part or 0) for part in iso.groups())
        return round(
            (weeks * 7 + days) * DAY
            + hours * _UNITS["h"]
            + minutes * _UNITS["min"]
            + seconds * SECOND
        )
    raise ValueError(f"{text!r} is not a duration: write 500ms, 30s, 5min, 8h or 14d")


def format_duration(microseconds: int) -> str:
    """The shortest of ``500ms``, ``30s``, ``5min``, ``8h``, ``14d`` that says it exactly."""
    for unit in ("d", "h", "min", "s", "ms"):
        if microseconds and microseconds % _UNITS[unit] == 0:
            return f"{microseconds // _UNITS[unit]}{unit}"
    return f"{microseconds}us" if microseconds else "0s"


def format_time(microseconds: int) -> str:
    """ISO 8601 UTC with ``Z``: three decimals, six where the microseconds need them."""
    moment = EPOCH + timedelta(microseconds=microseconds)
    spec = "milliseconds" if microseconds % 1_000 == 0 else "microseconds"
    return moment.replace(tzinfo=None).isoformat(timespec=spec) + "Z"


def parse_iso_time(text: str) -> int:
    """Microseconds since 1970 of an ISO 8601 instant with an offset.

    Raises ValueError where the text is no such instant, or carries no offset (its moment would be a
    guess).
    """
    try:
        since = datetime.fromisoformat(text) - EPOCH
    except TypeError:
        raise ValueError("no offset from UTC") from None
    return since // MICROSECOND
