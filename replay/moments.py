"""When an entry of a recording arrived, from what its file says.

Knows ISO 8601 and epoch numbers, as readings may write them. Must not know files.
"""

from __future__ import annotations

from monitor import times
from monitor.decode import judge_time

FIRST = -62_135_596_800 * times.SECOND  # 0001-01-01T00:00Z
LAST = 253_402_300_800 * times.SECOND - times.DAY  # a day before the year 10000


def arrival(value: object) -> int | None:
    """Microseconds since 1970, or None where ``value`` is no moment that a calendar can write."""
    if type(value) is str:
        try:
            moment = times.parse_iso_time(value)
            return moment if FIRST <= moment <= LAST else None
        except ValueError:
            pass  # an epoch number may be written as a text
    judged = judge_time(value, LAST)
    return judged if type(judged) is int and judged <= LAST else None
