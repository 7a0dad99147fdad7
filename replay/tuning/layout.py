"""Paragraphs and tables on a terminal of so many columns.

Knows columns and widths. Must not know what is told.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

_WIDEST = 96
"""Of a paragraph: longer lines are hard to read."""

_INDENT = 4


@dataclass(frozen=True, slots=True)
class Row:
    """A ``mark`` before it, what it is of, ``more`` on that, and its figures."""

    mark: str
    name: str
    more: str
    figures: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Table:
    """Titles of name, of what more there is (empty: nothing) and of the figures; groups of rows,
    each under a line of its own where that is not empty."""

    name: str
    more: str
    figures: tuple[str, ...]
    groups: tuple[tuple[str, tuple[Row, ...]], ...]


def paragraph(text: str, width: int, bullet: str = "") -> list[str]:
    """``text`` in lines."""
    inside = min(width, _WIDEST)
    return _wrapped(text, inside, bullet, " " * len(bullet))


def table(shown: Table, width: int) -> Iterator[str]:
    """A line a row where ``width`` allows it; else without what more there is, which follows on a
    line of its own; else with the figures below the name."""
    rows = [row for _, group in shown.groups for row in group]
    if not rows:
        return
    form = _form(shown, rows, width)
    yield from form.lines(Row("", shown.name, shown.more, shown.figures), is_head=True)
    for title, group in shown.groups:
        if title and group:
            yield title
        for row in group:
            yield from form.lines(row)


@dataclass(frozen=True, slots=True)
class _Form:
    mark: int
    name: int
    more: int
    figures: tuple[int, ...]
    width: int

    def lines(self, row: Row, is_head: bool = False) -> Iterator[str]:
        told = "  ".join(c.rjust(w) for c, w in zip(row.figures, self.figures, strict=True))
        begun, indent = f"{row.mark:<{self.mark}}", " " * self.mark
        line = f"{begun}{row.name:<{self.name}}  {told}".rstrip()
        whole = f"{begun}{row.name:<{self.name}}  {row.more:<{self.more}}  {told}".rstrip()
        narrow = self.mark + self.name + 2 + len(told)
        if narrow + 2 + self.more <= self.width and self.more:
            yield whole
        elif narrow <= self.width:
            yield line
            if row.more and not is_head:
                yield from _wrapped(row.more, self.width, indent, indent)
        else:
            if not is_head:
                named = f"{row.name}: {row.more}" if row.more else row.name
                yield from _wrapped(named, self.width, begun, indent)
            yield f"{indent}{told}".rstrip()


def _form(shown: Table, rows: Sequence[Row], width: int) -> _Form:
    columns = zip(shown.figures, *(row.figures for row in rows), strict=True)
    return _Form(
        mark=max(_INDENT, 1 + max(len(row.mark) for row in rows)),
        name=max(len(shown.name), *(len(row.name) for row in rows)),
        more=max(len(shown.more), *(len(row.more) for row in rows)) if shown.more else 0,
        figures=tuple(max(map(len, column)) for column in columns),
        width=width,
    )


def _wrapped(text: str, width: int, first: str, rest: str) -> list[str]:
    """Names with hyphens stay whole, to be found again."""
    return textwrap.wrap(
        text, width, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False
    )
