"""Tables, charts and folds as HTML; every text that comes in is escaped here, unless it is HTML.

Knows HTML. Must not know what is shown.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape

_UNIT = re.compile(r"(?<=\d) (?=(?:s|min|h|days|years)\b|%)")


@dataclass(frozen=True, slots=True)
class Html:
    """A text that is HTML already."""

    text: str


Text = str | Html


@dataclass(frozen=True, slots=True)
class Chart:
    """A chart: ``figure`` as plotly's JSON, ``said`` its message in words for who cannot see it,
    ``caption`` how to read it. ``name`` is unique in the page."""

    name: str
    figure: str
    said: str
    caption: str


def inline(text: Text) -> str:
    """``text`` as HTML."""
    return text.text if isinstance(text, Html) else _UNIT.sub("\u00a0", escape(text))


def paragraph(text: Text, kind: str = "") -> str:
    """A paragraph, of a class where ``kind`` names one."""
    return f"<p{_class(kind)}>{inline(text)}</p>"


def with_note(text: str, note: str) -> Html:
    """``text`` with a smaller line below it."""
    small = f'<span class="note">{inline(note)}</span>' if note else ""
    return Html(inline(text) + small)


def section(name: str, question: str, *parts: str) -> str:
    """One question of the reader and its answer."""
    return (
        f'<section id="{name}" aria-labelledby="{name}-question">'
        f'<h2 id="{name}-question">{escape(question)}</h2>{"".join(parts)}</section>'
    )


def heading(text: str) -> str:
    """A heading inside a section."""
    return f"<h3>{escape(text)}</h3>"


def table(caption: str, columns: Sequence[str], rows: Iterable[Sequence[Text]]) -> str:
    """A table whose first column names its rows. On a narrow screen each row becomes a card, so
    every cell carries its column's title."""
    heads = "".join(f'<th scope="col">{escape(column)}</th>' for column in columns)
    body = "".join(_row(columns, row) for row in rows)
    return (
        f"<table><caption>{inline(caption)}</caption>"
        f"<thead><tr>{heads}</tr></thead><tbody>{body}</tbody></table>"
    )


def _row(columns: Sequence[str], row: Sequence[Text]) -> str:
    first, *rest = row
    cells = "".join(
        f'<td data-column="{escape(column)}"><span>{inline(cell)}</span></td>'
        for column, cell in zip(columns[1:], rest, strict=True)
    )
    return f'<tr><th scope="row">{inline(first)}</th>{cells}</tr>'


def facts(pairs: Iterable[tuple[str, Text]], kind: str = "") -> str:
    """Names with their values."""
    return (
        f"<dl{_class(kind)}>"
        + "".join(f"<div><dt>{escape(k)}</dt><dd>{inline(v)}</dd></div>" for k, v in pairs)
        + "</dl>"
    )


def fold(title: str, *parts: str) -> str:
    """Parts that are closed until asked for."""
    return f"<details><summary>{escape(title)}</summary>{''.join(parts)}</details>"


def chart(drawn: Chart) -> str:
    """A place for the chart and its data; the script of the page draws it."""
    data = drawn.figure.replace("<", "\\u003c")  # no end of a script within the data
    return (
        f'<figure><div class="plot" role="img" id="{drawn.name}"'
        f' aria-label="{escape(drawn.said)}"></div>'
        f'<script type="application/json" id="{drawn.name}-data">{data}</script>'
        f"<figcaption>{inline(drawn.caption)}</figcaption></figure>"
    )


def _class(kind: str) -> str:
    return f' class="{kind}"' if kind else ""
