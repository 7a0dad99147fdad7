"""Tables of readings (CSV) as journal entries.

Knows columns and cells. Must not know files or plans: what a value or a time means is the engine's
to judge.
"""

from __future__ import annotations

import csv
import difflib
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from monitor.commandline import WRONG, CommandError
from monitor.entries import Reading
from monitor.times import SECOND
from replay.moments import arrival

OnUnreadable = Callable[[int, str], None]
"""Told the number of the line where a row ends that is no entry, and what is wrong with it."""

FIRST_ROW = 946_684_800 * SECOND
"""2000-01-01T00:00Z in microseconds: where a table without times begins."""

WORDS = ("characteristic", "value", "time", "sequence")
"""Columns that have a meaning of their own; every other one is a stream key or nobody's."""

_SHOWN = 12


@dataclass(frozen=True, slots=True)
class Layout:
    """What to look for in a table.

    ``keys``: the stream keys that may have a column. ``headers``: the header of a word or key,
    where it is not that name itself. ``characteristic``: whose rows they are where no column says
    so; None where a column must.
    """

    keys: tuple[str, ...]
    headers: Mapping[str, str]
    characteristic: str | None


class Table:
    """The table in ``file``, that people know as ``name``.

    Raises CommandError, at once, where it lacks a column it needs.
    """

    def __init__(
        self, name: str, file: Iterable[str], layout: Layout, unreadable: OnUnreadable
    ) -> None:
        self._rows = _rows(csv.reader(file), unreadable)
        self._header = [cell.strip() for cell in next(self._rows, (0, []))[1]]
        self._columns = _columns(name, self._header, layout)
        self._layout = layout
        self._unreadable = unreadable

    @property
    def timed(self) -> bool:
        """Whether it has a column of times."""
        return "time" in self._columns

    def readings(self, clock: Iterator[int]) -> Iterator[tuple[int, Reading]]:
        """Line numbers from 1, and readings.

        ``clock`` gives each row's moment (µs) where the table has no times; tables played one after
        another share it.
        """
        columns, layout, unreadable = self._columns, self._layout, self._unreadable
        width = len(self._header)
        value_at = columns["value"]
        whose, when, count = (columns.get(word) for word in ("characteristic", "time", "sequence"))
        streams = [(key, columns[key]) for key in layout.keys if key in columns]
        characteristic = layout.characteristic or ""
        time, timed = FIRST_ROW, False
        at: object = None
        sequence: object = None
        for number, row in self._rows:
            if when is None:
                time = next(clock)
                at = time / SECOND
            if len(row) != width:
                if any(row[width:]):
                    wrong = f"{len(row)} cells under {width} column names: a comma inside a value?"
                    unreadable(number, wrong)
                    continue
                row += [""] * (width - len(row))
            if when is not None:
                at = row[when].strip() or None
                # A table has no arrivals: a row counts as arriving no earlier than those above it.
                moment = arrival(at)
                if moment is not None and (moment > time or not timed):
                    time, timed = moment, True
            if whose is not None:
                characteristic = row[whose].strip()
            if count is not None:
                sequence = row[count].strip() or None
            stream = {key: cell for key, index in streams if (cell := row[index].strip())}
            yield number, Reading(time, characteristic, stream, _value(row[value_at]), at, sequence)


def _rows(table: Any, unreadable: OnUnreadable) -> Iterator[tuple[int, list[str]]]:
    """The rows that are not blank, with the number of the line each ends on."""
    while True:
        try:
            for row in table:
                if row:
                    yield table.line_num, row
            return
        except csv.Error as error:
            unreadable(table.line_num, f"no row of a table: {error}")


def _value(cell: str) -> object:
    """A number where Python's float reads one, else the text; None where the cell is empty."""
    try:
        # Digits grouped by underscores are a programmer's habit, not a gauge's.
        return float(cell) if "_" not in cell else cell
    except ValueError:
        return cell.strip() or None


def _columns(name: str, header: list[str], layout: Layout) -> dict[str, int]:
    """Which column holds each word and stream key that the table has."""
    if not header:
        raise CommandError(f"{name} is empty: a table starts with a row of column names")
    found: dict[str, int] = {}
    for word in (*WORDS, *layout.keys):
        wanted = layout.headers.get(word, word)
        if header.count(wanted) > 1:
            raise CommandError(f"{name} has {header.count(wanted)} columns {wanted!r}: keep one")
        if wanted in header:
            found[word] = header.index(wanted)
        elif word in layout.headers:
            raise CommandError(f"{name} has no column {wanted!r}: {_has(header, wanted)}", WRONG)
    if "value" not in found:
        which = "" if _joined(header) else '; say which with --column value="..."'
        raise CommandError(f"{name} has no column 'value': {_has(header, 'value')}{which}")
    if "characteristic" not in found and layout.characteristic is None:
        raise CommandError(
            f"{name} has no column 'characteristic', and the configuration has more than one: "
            "add the column, or play the table with a configuration of that one"
        )
    return found


def _has(header: list[str], wanted: str) -> str:
    if _joined(header):
        return "its columns are not separated by commas; save it with commas"
    near = difflib.get_close_matches(wanted, header, 1)
    if near:
        return f"did you mean {near[0]!r}?"
    more = ", …" if len(header) > _SHOWN else ""
    return f"it has {', '.join(repr(cell[:40]) for cell in header[:_SHOWN])}{more}"


def _joined(header: list[str]) -> bool:
    """Whether something else than a comma separates the cells."""
    return len(header) == 1 and (";" in header[0] or "\t" in header[0])
