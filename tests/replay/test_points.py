"""The table of points, read back by Python's own csv module."""

from __future__ import annotations

import csv
import io

import plans
import pytest

from monitor.outputs import Points, Row
from monitor.plan import Stream
from monitor.subgroups import Subgroup
from replay.points import HEADER, PointsTable


def subgroup(number: int) -> Subgroup:
    return Subgroup(
        number, (1.0, 2.0), 0, 1_772_433_672_350_001, (1, None, None, None), False, 2, 1.5
    )


def test_columns_and_cells() -> None:
    rows = (
        Row("mean", "mean", "mean", 0.1 + 0.2, 0.0, -1e-300, 1e22, ()),
        Row("slow, cusum", "mean", "upper_sum", 3.0, 0.0, None, 2.0, ("cusum-upper", 'a"b')),
    )
    points = Points(
        plans.characteristic(name="net-weight"), (("head", "4"), ("lane", "1")), subgroup(7), rows
    )
    table = HEADER + PointsTable().rows(points)
    header, rows_below = table.split(b"\n", 1)
    assert header == (
        b"characteristic,stream,number,time,size,detector,chart,statistic,"
        b"value,centre,lower,upper,rule"
    )
    first, second = csv.reader(io.StringIO(rows_below.decode()))
    whose = ["net-weight", "head=4;lane=1", "7", "2026-03-02T06:41:12.350001Z", "2"]
    assert first[:5] == second[:5] == whose
    assert first[5:8] == ["mean", "mean", "mean"]
    assert first[8:] == ["0.30000000000000004", "0.0", "-1e-300", "1e+22", ""]
    assert second[5:8] == ["slow, cusum", "mean", "upper_sum"]
    assert second[8:] == ["3.0", "0.0", "", "2.0", 'cusum-upper;a"b']


@pytest.mark.parametrize(
    ("stream", "text"),
    [
        ((), ""),
        ((("head", "Düse 4"),), "head=Düse 4"),
        ((("head", "4;5"), ("lane", "50%")), "head=4%3B5;lane=50%25"),
    ],
)
def test_streams_can_be_read_back(stream: Stream, text: str) -> None:
    row = Row("d", "mean", "mean", 1.0, 0.0, None, None, ())
    points = Points(plans.characteristic(name="c"), stream, subgroup(1), (row,))
    [cells] = csv.reader(io.StringIO(PointsTable().rows(points).decode()))
    assert cells[1] == text


def test_streams_that_need_quotes_get_them_each_time() -> None:
    table = PointsTable()
    row = Row("d", "mean", "mean", 1.0, 0.0, None, None, ())
    for head in ('a"b', "a,b", "a\nb", 'a"b'):
        points = Points(plans.characteristic(name="c"), (("head", head),), subgroup(1), (row,))
        [cells] = csv.reader(io.StringIO(table.rows(points).decode(), newline=""))
        assert cells[1] == f"head={head}"
