"""Tables of readings as entries."""

from __future__ import annotations

import csv
import io
import itertools
import math
from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.commandline import WRONG, CommandError
from monitor.entries import Reading
from replay.tables import FIRST_ROW, Layout, Table

SECOND = 1_000_000
PLAIN = Layout(("head", "lane"), {}, None)


def read(
    text: str, layout: Layout = PLAIN, clock: itertools.count[int] | None = None
) -> tuple[list[tuple[int, Reading]], list[tuple[int, str]]]:
    wrong: list[tuple[int, str]] = []
    file = io.StringIO(text, newline="")
    table = Table("a.csv", file, layout, lambda number, why: wrong.append((number, why)))
    rows = table.readings(itertools.count(FIRST_ROW, SECOND) if clock is None else clock)
    return list(rows), wrong


def test_every_column() -> None:
    rows, wrong = read(
        "time,characteristic,head,lane,sequence,value,remark\r\n"
        '2026-03-02T06:41:12.350Z,net-weight,4,1,17,341.5,"fine, he said"\r\n'
    )
    assert not wrong
    assert rows == [
        (
            2,
            Reading(
                1_772_433_672_350_000,
                "net-weight",
                {"head": "4", "lane": "1"},
                341.5,
                "2026-03-02T06:41:12.350Z",
                "17",
            ),
        )
    ]


def test_without_times_rows_are_an_interval_apart_from_2000_on() -> None:
    clock = itertools.count(FIRST_ROW, 250_000)
    rows, _ = read("characteristic,value\na,1\n\na,x,extra\na,2\n", clock=clock)
    # 2000-01-01T00:00Z is 946684800 s after 1970 (`date -u -d 2000-01-01 +%s`). A row that is no
    # entry still took its time; a blank line is no row.
    assert [row.time for _, row in rows] == [946_684_800_000_000, 946_684_800_500_000]
    assert [row.at for _, row in rows] == [946_684_800.0, 946_684_800.5]
    assert next(clock) == 946_684_800_750_000


def test_a_row_with_times_arrives_no_earlier_than_the_rows_above_it() -> None:
    rows, _ = read(
        "time,characteristic,value\n"
        ",a,0\n"
        "1999-01-01T00:00:10Z,a,1\n"
        "never,a,2\n"
        "1999-01-01T00:00:05Z,a,3\n"
        "1999-01-01T00:00:20Z,a,4\n"
    )
    first = 915_148_800 * SECOND  # `date -u -d 1999-01-01 +%s`
    assert [row.time - first for _, row in rows[1:]] == [
        10 * SECOND,
        10 * SECOND,
        10 * SECOND,
        20 * SECOND,
    ]
    assert [row.at for _, row in rows] == [
        None,
        "1999-01-01T00:00:10Z",
        "never",
        "1999-01-01T00:00:05Z",
        "1999-01-01T00:00:20Z",
    ]


@pytest.mark.parametrize(
    ("cell", "value"),
    [
        ("341.5", 341.5),
        (" 341.5 ", 341.5),
        (".5", 0.5),
        ("-1e3", -1000.0),
        ("1e999", math.inf),
        ("", None),
        ("  ", None),
        ("n/a", "n/a"),
        ('"341,5"', "341,5"),
        ("1_000", "1_000"),
        ("true", "true"),
    ],
)
def test_values_are_numbers_where_they_can_be(cell: str, value: object) -> None:
    rows, wrong = read(f"characteristic,value\na,{cell}\n")
    assert not wrong
    assert [row.value for _, row in rows] == [value]


def test_the_only_characteristic_needs_no_column() -> None:
    rows, _ = read("value\n1\n2\n", Layout((), {}, "cap-torque"))
    assert [row.characteristic for _, row in rows] == ["cap-torque"] * 2


def test_columns_can_have_other_headers() -> None:
    headers = {"time": "Date/Time", "value": "Net (g)", "head": "Nozzle"}
    rows, _ = read(
        "Nozzle, Date/Time ,Net (g),value\n4,2026-03-02T06:41:12Z,341.5,9\n",
        Layout(("head",), headers, "a"),
    )
    [(_, row)] = rows
    assert (row.at, row.value, row.stream) == ("2026-03-02T06:41:12Z", 341.5, {"head": "4"})


def test_short_rows_lack_their_cells_and_long_ones_are_refused() -> None:
    rows, wrong = read("characteristic,value,head\na,1\na,1,4,,\na,341,5,4\na\n")
    assert [(n, row.value, row.stream) for n, row in rows] == [
        (2, 1.0, {}),
        (3, 1.0, {"head": "4"}),
        (5, None, {}),
    ]
    [(number, why)] = wrong
    assert number == 4
    assert why.startswith("4 cells under 3 column names: a comma inside a value?")


def test_a_field_without_end_is_told_and_what_follows_it_is_read() -> None:
    rows, wrong = read('characteristic,value\na,1\na,"' + "x" * 200_000 + '"\na,2\n')
    assert [row.value for _, row in rows] == [1.0, 2.0]
    assert [number for number, _ in wrong] == [3]


@pytest.mark.parametrize(
    ("text", "layout", "why"),
    [
        ("", PLAIN, "a.csv is empty"),
        ("characteristic,Value\n", PLAIN, "a.csv has no column 'value': did you mean 'Value'?"),
        ("characteristic,x\n", PLAIN, "has no column 'value': it has 'characteristic', 'x'; say"),
        ("characteristic;value\n", PLAIN, "not separated by commas; save it with commas"),
        ("value\n1\n", PLAIN, "no column 'characteristic', and the configuration has more than"),
        ("characteristic,value,value\n", PLAIN, "has 2 columns 'value': keep one"),
        ("value\n", Layout((), {"time": "When"}, "a"), "has no column 'When': it has 'value'"),
    ],
)
def test_a_table_that_cannot_be_read_says_what_to_do(text: str, layout: Layout, why: str) -> None:
    with pytest.raises(CommandError) as error:
        read(text, layout)
    assert why in str(error.value)
    assert (error.value.code == WRONG) == bool(layout.headers)


def test_where_cells_are_not_told_apart_no_column_can_be_named() -> None:
    with pytest.raises(CommandError, match=r"save it with commas$"):
        read("characteristic;value\n", PLAIN)


@given(st.text(max_size=200), st.booleans())
def test_no_text_crashes_it(text: str, headed: bool) -> None:
    with suppress(CommandError):
        read("time,characteristic,value,head,sequence\n" + text if headed else text)


@given(
    st.lists(
        st.tuples(
            st.text("0123456789abc\"',;\n é", max_size=5),
            st.floats(allow_nan=False, allow_infinity=False),
        )
    )
)
def test_what_a_csv_writer_wrote_comes_back(cells: list[tuple[str, float]]) -> None:
    file = io.StringIO(newline="")
    writer = csv.writer(file)
    writer.writerow(["characteristic", "head", "value"])
    writer.writerows(["a", head, repr(value)] for head, value in cells)
    rows, wrong = read(file.getvalue())
    assert not wrong
    assert [(row.stream.get("head", ""), row.value) for _, row in rows] == [
        (head.strip(), value) for head, value in cells
    ]
