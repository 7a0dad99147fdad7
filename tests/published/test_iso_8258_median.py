"""The worked example of a median chart in ISO 8258:1991 (Shewhart control charts; ISO 7870-2 has
taken its place), through the product's main path.

Data and printed figures are from memory; the printed means, 11.47 and 5.73, are those of the rows'
medians and ranges. A machine makes mica discs; every half-hour five are measured, here in units
of 0.001 cm. The standard prints the centre 11.47 and, with the factor 0.69 and a mean range of
5.73, limits of 7.52 and 15.42 for the medians and 12.11 for the ranges; all points are inside.
"""

from __future__ import annotations

import csv
import json
from pathlib import Path
from statistics import fmean

import pytest

from monitor.methods.constants import d2
from replay.__main__ import main

THICKNESS = [
    (14, 8, 12, 12, 8),
    (11, 10, 13, 8, 10),
    (11, 12, 16, 14, 9),
    (16, 12, 17, 15, 13),
    (15, 12, 14, 10, 7),
    (13, 8, 15, 15, 8),
    (14, 12, 13, 10, 16),
    (11, 10, 8, 16, 10),
    (14, 10, 12, 9, 7),
    (12, 10, 12, 14, 10),
    (10, 12, 8, 10, 12),
    (10, 10, 8, 8, 10),
    (8, 12, 10, 8, 10),
    (13, 8, 11, 14, 12),
    (7, 8, 14, 13, 11),
]
MEDIANS = [12, 10, 12, 15, 12, 13, 13, 10, 10, 12, 10, 10, 10, 12, 11]
RANGES = [6, 5, 7, 5, 8, 7, 6, 8, 7, 4, 4, 2, 4, 6, 7]

Row = dict[str, str]


def play(
    folder: Path, values: list[float], size: int, mean: float, sigma: float
) -> tuple[list[Row], list[Row]]:
    """The points of the median chart and of the range chart, three standard errors wide."""
    disc = {
        "source": {"topic": "mica/disc", "payload": "number"},
        "subgroup": {"size": size},
        "baseline": {"mean": mean, "sigma": sigma},
        "detectors": [
            {"kind": "shewhart", "chart": "median", "width": 3},
            {"kind": "shewhart", "chart": "range", "width": 3},
        ],
    }
    configuration = {
        "version": 1,
        "broker": {"host": "localhost"},
        "outputs": {"root": "mica/monitor"},
        "journal": {"path": "mica.db"},
        "characteristics": {"disc": disc},
    }
    (folder / "c.yaml").write_text(json.dumps(configuration))  # JSON is YAML
    (folder / "r.csv").write_text("value\n" + "".join(f"{value}\n" for value in values))
    points = folder / "points.csv"
    files = [str(folder / "c.yaml"), str(folder / "r.csv"), "--points", str(points)]
    assert main(["play", *files]) == 0
    with points.open(newline="") as table:
        rows = list(csv.DictReader(table))
    return [r for r in rows if r["chart"] == "median"], [r for r in rows if r["chart"] == "range"]


def test_the_worked_example(tmp_path: Path) -> None:
    assert (sum(MEDIANS), sum(RANGES)) == (172, 86)
    values = [float(value) for discs in THICKNESS for value in discs]
    medians, ranges = play(tmp_path, values, 5, fmean(MEDIANS), fmean(RANGES) / d2(5))
    assert [float(row["value"]) for row in medians] == MEDIANS
    assert [float(row["value"]) for row in ranges] == RANGES
    for row in medians:
        assert float(row["centre"]) == pytest.approx(11.47, abs=0.005)
        # The printed factor has two decimals: half a unit of its last is 0.03 of a limit.
        assert float(row["lower"]) == pytest.approx(7.52, abs=0.03)
        assert float(row["upper"]) == pytest.approx(15.42, abs=0.03)
    for row in ranges:
        assert float(row["centre"]) == pytest.approx(5.73, abs=0.005)
        assert float(row["lower"]) == 0.0
        assert float(row["upper"]) == pytest.approx(12.11, abs=0.015)
    assert not any(row["rule"] for row in medians + ranges), "the process was in control"


@pytest.mark.parametrize(("size", "factor"), [(3, 1.187), (5, 0.691), (7, 0.508), (9, 0.412)])
def test_the_factor_by_which_a_mean_range_makes_limits(
    tmp_path: Path, size: int, factor: float
) -> None:
    """Of medians, odd sizes: common practice, as handbooks print it to three decimals; from memory,
    where the last digit differs by one between them."""
    medians, _ = play(tmp_path, [0.0] * size, size, 0.0, 1 / d2(size))  # a mean range of 1
    assert float(medians[0]["upper"]) == pytest.approx(factor, abs=0.0015)
    assert float(medians[0]["lower"]) == -float(medians[0]["upper"])
