"""The table of points: a row for each statistic of each detector at each subgroup.

Knows the columns and CSV. Must not know files or where points come from.
"""

from __future__ import annotations

from monitor import stream_names
from monitor.outputs import Points, Row
from monitor.plan import CharacteristicPlan, Stream
from monitor.times import format_time

HEADER = (
    b"characteristic,stream,number,time,size,detector,chart,statistic,"
    b"value,centre,lower,upper,rule\n"
)


class PointsTable:
    """Turns points into rows of the table, UTF-8. Texts that come again are quoted only once."""

    def __init__(self) -> None:
        self._whose: dict[tuple[str, Stream], str] = {}
        self._what: dict[tuple[str, str, str], str] = {}

    def rows(self, points: Points) -> bytes:
        """The rows of one subgroup, each with its newline."""
        characteristic, stream, subgroup, rows = points
        whose = self._whose.get((characteristic.name, stream))
        if whose is None:
            whose = self._name_stream(characteristic, stream)
        head = f"{whose},{subgroup.number},{format_time(subgroup.last)},{subgroup.size},"
        lines = ""
        for row in rows:
            detector, chart, statistic, value, centre, lower, upper, rules = row
            what = self._what.get((detector, chart, statistic))
            if what is None:
                what = self._name_row(row)
            low = "" if lower is None else repr(lower)
            high = "" if upper is None else repr(upper)
            lines += f"{head}{what},{value!r},{centre!r},{low},{high},{';'.join(rules)}\n"
        return lines.encode()

    def _name_stream(self, characteristic: CharacteristicPlan, stream: Stream) -> str:
        text = f"{_cell(characteristic.name)},{_cell(stream_names.name(stream))}"
        self._whose[characteristic.name, stream] = text
        return text

    def _name_row(self, row: Row) -> str:
        text = ",".join(map(_cell, row[:3]))
        self._what[row[:3]] = text
        return text


def _cell(text: str) -> str:
    """A CSV cell (RFC 4180, section 2)."""
    if any(mark in text for mark in ',"\r\n'):
        return '"' + text.replace('"', '""') + '"'
    return text
