"""Inside diameters of piston rings, 25 subgroups of five: the X̄-R and X̄-s example of D. C.
Montgomery, Introduction to Statistical Quality Control. Readings and printed results from memory;
that the readings give the printed averages speaks for both.

Through the product's main path, but for the s chart's limits.
"""

from __future__ import annotations

import csv
from pathlib import Path
from statistics import fmean, stdev

import pytest
import yaml

from monitor.methods.constants import c4, d2
from monitor.methods.limits import sd_limits
from replay.__main__ import main

# Thousandths of a millimetre above 74 mm.
RINGS = [
    *((30, 2, 19, -8, 8), (-5, -8, 1, 11, 4), (-12, 24, 21, 5, 2), (2, -4, -7, 15, 9)),
    *((-8, 7, 15, -11, 14), (9, -6, -3, -15, -7), (-5, 6, -6, 0, 5), (-15, 3, -7, 15, -12)),
    *((8, -5, 9, 5, 4), (-2, 0, -10, 7, -5), (-6, -2, -6, -5, -10), (4, 0, 7, 0, -4)),
    *((-17, 2, -2, -3, 12), (6, -33, -6, 0, -16), (12, 14, -2, -1, 7), (0, -16, 5, -2, -4)),
    *((-6, 12, -14, 5, 7), (6, 10, 18, 3, 0), (-16, 2, 3, 5, -3), (0, 10, 13, 20, 3)),
    *((-18, 1, 15, 5, -4), (4, -1, -10, 6, 9), (10, -11, -10, 9, 14), (15, 8, -7, 0, 10)),
    (-18, -16, -5, 17, 13),
]
READINGS = [[round(74 + x / 1000, 3) for x in subgroup] for subgroup in RINGS]


def test_the_readings_give_the_printed_averages() -> None:
    assert len(READINGS) == 25
    assert round(fmean(map(fmean, READINGS)), 3) == 74.001
    assert round(fmean(max(s) - min(s) for s in READINGS), 3) == 0.023
    assert round(fmean(map(stdev, READINGS)), 4) == 0.0094


@pytest.mark.parametrize("estimate", ["range", "sd"])
def test_limits_as_printed(tmp_path: Path, estimate: str) -> None:
    spread = fmean(max(s) - min(s) for s in READINGS) / d2(5)
    if estimate == "sd":
        spread = fmean(map(stdev, READINGS)) / c4(5)
    configuration = {
        "version": 1,
        "broker": {"host": "localhost"},
        "outputs": {"root": "rings/monitor"},
        "journal": {"path": "rings.db"},
        "characteristics": {
            "diameter": {
                "source": {"topic": "rings/diameter", "payload": "number"},
                "subgroup": {"size": 5},
                "baseline": {"mean": fmean(map(fmean, READINGS)), "sigma": spread},
                "detectors": [
                    {"kind": "shewhart", "chart": "mean", "width": 3},
                    {"kind": "shewhart", "chart": "range", "width": 3},
                ],
            }
        },
    }
    (tmp_path / "c.yaml").write_text(yaml.safe_dump(configuration))
    rows = "".join(f"diameter,{x}\n" for subgroup in READINGS for x in subgroup)
    (tmp_path / "r.csv").write_text("characteristic,value\n" + rows)
    points = tmp_path / "points.csv"
    files = [str(tmp_path / "c.yaml"), str(tmp_path / "r.csv"), "--points", str(points)]
    assert main(["play", *files, "--interval", "1s"]) == 0
    with points.open(newline="") as table:
        found = list(csv.DictReader(table))
    assert not any(row["rule"] for row in found), "both charts were in control"
    means = [row for row in found if row["chart"] == "mean"]
    ranges = [row for row in found if row["chart"] == "range"]
    assert len(means) == len(ranges) == 25
    for row in means:
        # Printed from averages already rounded: a unit of the last digit.
        assert float(row["lower"]) == pytest.approx(73.988, abs=0.001)
        assert float(row["upper"]) == pytest.approx(74.014, abs=0.001)
    for row, readings in zip(ranges, READINGS, strict=True):
        assert float(row["value"]) == pytest.approx(max(readings) - min(readings))
        assert float(row["lower"]) == 0
        assert float(row["upper"]) == pytest.approx(0.049, abs=0.001)


def test_limits_of_the_standard_deviation_as_printed() -> None:
    limits = sd_limits(5, fmean(map(stdev, READINGS)) / c4(5), 3)
    assert (round(limits.centre, 4), limits.lower, round(limits.upper, 4)) == (0.0094, 0, 0.0196)
