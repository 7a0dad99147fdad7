"""The worked examples of the NIST/SEMATECH e-Handbook of Statistical Methods, chapter 6.3.2 (public
domain), through the product's main path: a recording and a configuration in, points out.
"""

from __future__ import annotations

import csv
import math
from itertools import pairwise
from pathlib import Path
from statistics import fmean
from typing import Any

import pytest
import yaml

from monitor.methods.constants import d2
from replay.__main__ import main

Row = dict[str, str]


def play(folder: Path, values: list[float], characteristic: dict[str, Any]) -> list[Row]:
    """The points of ``values``, a second apart, under one configured characteristic."""
    configuration = {
        "version": 1,
        "broker": {"host": "localhost"},
        "outputs": {"root": "handbook/monitor"},
        "journal": {"path": "handbook.db"},
        "characteristics": {
            "example": {"source": {"topic": "handbook/example", "payload": "number"}}
            | {"subgroup": {"size": 1}}
            | characteristic
        },
    }
    (folder / "c.yaml").write_text(yaml.safe_dump(configuration))
    (folder / "r.csv").write_text(
        "characteristic,value\n" + "".join(f"example,{value}\n" for value in values)
    )
    points = folder / "points.csv"
    files = [str(folder / "c.yaml"), str(folder / "r.csv"), "--points", str(points)]
    assert main(["play", *files, "--alerts", str(folder / "alerts.jsonl"), "--interval", "1s"]) == 0
    with points.open(newline="") as table:
        return list(csv.DictReader(table))


FLOW_RATES = [49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1]


@pytest.mark.parametrize(
    ("divisor", "lower", "upper"),
    [
        (d2(2), 45.8176, 55.8024),
        (1.128, 45.8159, 55.8041),  # as printed: the handbook divides by the rounded constant
    ],
)
def test_6_3_2_2_individuals(tmp_path: Path, divisor: float, lower: float, upper: float) -> None:
    mean = fmean(FLOW_RATES)
    moving_range = fmean(abs(b - a) for a, b in pairwise(FLOW_RATES))
    assert round(mean, 2) == 50.81
    assert round(moving_range, 4) == 1.8778
    rows = play(
        tmp_path,
        FLOW_RATES,
        {
            "baseline": {"mean": mean, "sigma": moving_range / divisor},
            "detectors": [
                {"kind": "shewhart", "chart": "individual", "width": 3},
                {"kind": "shewhart", "chart": "moving_range", "width": 3},
            ],
        },
    )
    individuals = [row for row in rows if row["chart"] == "individual"]
    assert [float(row["value"]) for row in individuals] == FLOW_RATES
    for row in individuals:
        assert round(float(row["centre"]), 2) == 50.81
        assert round(float(row["lower"]), 4) == lower
        assert round(float(row["upper"]), 4) == upper
    ranges = [row for row in rows if row["chart"] == "moving_range"]
    assert len(ranges) == len(FLOW_RATES) - 1
    assert float(ranges[0]["centre"]) == pytest.approx(1.8778, abs=1e-3)
    assert not any(row["rule"] for row in rows), "the process was in control"


CUSUM_READINGS = [
    *(324.925, 324.675, 324.725, 324.350, 325.350, 325.225, 324.125, 324.525, 325.225, 324.600),
    *(324.625, 325.150, 328.325, 327.250, 327.825, 328.500, 326.675, 327.775, 326.875, 328.350),
]
CUSUM = {"kind": "cusum", "k": 0.3175, "h": 4.1959}
IN_THE_UNIT = {"mean": 325, "sigma": 1}  # the handbook gives k and h in the readings' unit


def test_6_3_2_3_cusum(tmp_path: Path) -> None:
    characteristic = {"baseline": IN_THE_UNIT, "detectors": [CUSUM | {"after_signal": "hold"}]}
    rows = play(tmp_path, CUSUM_READINGS, characteristic)
    upper = [row for row in rows if row["statistic"] == "upper_sum"]
    printed = [0, 0, 0, 0, 0.03, 0, 0, 0, 0, 0, 0, 0]
    printed += [3.01, 4.94, 7.45, 10.63, 11.99, 14.44, 16.00, 19.04]
    # Compared within half a unit of the last digit: 0.0325 is 0.03 in print.
    assert [float(row["value"]) for row in upper] == pytest.approx(printed, abs=0.0051)
    assert {row["upper"] for row in upper} == {"4.1959"}
    assert [i for i, row in enumerate(upper, 1) if row["rule"] == "cusum-upper"] == [*range(14, 21)]


def test_6_3_2_3_cusum_restarts_after_its_signal(tmp_path: Path) -> None:
    characteristic = {"baseline": IN_THE_UNIT, "detectors": [CUSUM]}
    rows = play(tmp_path, CUSUM_READINGS, characteristic)
    upper = [row for row in rows if row["statistic"] == "upper_sum"]
    assert [i for i, row in enumerate(upper, 1) if row["rule"]] == [14, 16, 19]
    by_hand = [4.94, 2.5075, 5.69, 1.3575, 3.815, 5.3725, 3.0325]  # each after a signal from 0
    assert [float(row["value"]) for row in upper[13:]] == pytest.approx(by_hand)


EWMA_READINGS = [
    *(52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0, 50.1, 51.2, 50.5),
    *(49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1),
]


def test_6_3_2_4_ewma(tmp_path: Path) -> None:
    detector = {"kind": "ewma", "lambda": 0.3, "width": 3}
    rows = play(
        tmp_path,
        EWMA_READINGS,
        {
            "baseline": {"mean": 50, "sigma": 2.0539},
            "detectors": [detector | {"limits": "asymptotic"}, detector | {"name": "exact"}],
        },
    )
    settled = [row for row in rows if row["detector"] == "ewma"]
    assert [float(row["value"]) for row in settled[-5:]] == pytest.approx(
        [49.92, 50.73, 51.23, 51.94, 51.99], abs=0.005
    )
    for row in settled:
        assert round(float(row["lower"]), 4) == 47.4116
        assert round(float(row["upper"]), 4) == 52.5884
    assert not any(row["rule"] for row in rows)
    exact = [row for row in rows if row["detector"] == "exact"]
    assert [row["value"] for row in exact] == [row["value"] for row in settled]
    for i in (1, 2, 20):  # σ√(λ/(2−λ)·(1−(1−λ)²ⁱ)), the formula printed there
        reach = 3 * 2.0539 * math.sqrt(0.3 / 1.7 * (1 - 0.7 ** (2 * i)))
        assert float(exact[i - 1]["upper"]) == pytest.approx(50 + reach, rel=1e-12)
