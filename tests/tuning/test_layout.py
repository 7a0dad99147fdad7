"""Tables and paragraphs keep to the terminal's width, and lose nothing in a narrow one."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from replay.tuning.layout import Row, Table, paragraph, table

ROWS = (
    Row("1.", "cusum, catch 1.5, size 5", "k 0.96, h 11.05", ("0", "at least 6.7 days")),
    Row("", "as configured: shewhart-mean", "width 5.27", ("12", "36 h")),
)
SHOWN = Table("setting", "constants", ("seen", "one in"), (("", ROWS[:1]), ("more:", ROWS[1:])))


def test_a_wide_terminal_has_a_line_a_row() -> None:
    assert list(table(SHOWN, 100)) == [
        "    setting                       constants        seen             one in",
        "1.  cusum, catch 1.5, size 5      k 0.96, h 11.05     0  at least 6.7 days",
        "more:",
        "    as configured: shewhart-mean  width 5.27         12               36 h",
    ]


def test_a_narrower_one_has_more_below() -> None:
    assert list(table(SHOWN, 70)) == [
        "    setting                       seen             one in",
        "1.  cusum, catch 1.5, size 5         0  at least 6.7 days",
        "    k 0.96, h 11.05",
        "more:",
        "    as configured: shewhart-mean    12               36 h",
        "    width 5.27",
    ]


def test_a_narrow_one_has_the_figures_below() -> None:
    assert list(table(SHOWN, 50)) == [
        "    seen             one in",
        "1.  cusum, catch 1.5, size 5: k 0.96, h 11.05",
        "       0  at least 6.7 days",
        "more:",
        "    as configured: shewhart-mean: width 5.27",
        "      12               36 h",
    ]


@given(st.integers(40, 200))
def test_nothing_is_lost_and_nothing_sticks_out(width: int) -> None:
    lines = list(table(SHOWN, width))
    assert max(map(len, lines)) <= width
    told = " ".join(" ".join(lines).split())
    for row in ROWS:
        for part in (row.name, row.more, *row.figures):
            assert part in told


def test_no_rows_no_table() -> None:
    assert list(table(Table("setting", "", ("seen",), (("", ()),)), 80)) == []


@pytest.mark.parametrize("width", [40, 300])
def test_a_paragraph_is_never_too_long_to_read(width: int) -> None:
    lines = paragraph("a word " * 60, width, "- ")
    assert max(map(len, lines)) <= min(width, 96)
    assert lines[1].startswith("  a") or lines[1].startswith("  word")
