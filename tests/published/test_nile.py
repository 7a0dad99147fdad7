"""The annual flow of the Nile at Aswan, 1871 to 1970, which fell about 1899 (G. W. Cobb 1978,
Biometrika 65: a change point in 1898; the data, public, as in statsmodels.datasets.nile).

Through the product's main path, with a baseline from the first twenty years alone.
"""

from __future__ import annotations

import json
from pathlib import Path
from statistics import fmean, stdev
from typing import Any

import pytest
import yaml

from replay.__main__ import main

FIRST_YEAR = 1871
FLOWS = [
    *(1120, 1160, 963, 1210, 1160, 1160, 813, 1230, 1370, 1140, 995, 935, 1110, 994, 1020, 960),
    *(1180, 799, 958, 1140, 1100, 1210, 1150, 1250, 1260, 1220, 1030, 1100, 774, 840, 874, 694),
    *(940, 833, 701, 916, 692, 1020, 1050, 969, 831, 726, 456, 824, 702, 1120, 1100, 832, 764),
    *(821, 768, 845, 864, 862, 698, 845, 744, 796, 1040, 759, 781, 865, 845, 944, 984, 897, 822),
    *(1010, 771, 676, 649, 846, 812, 742, 801, 1040, 860, 874, 848, 890, 744, 749, 838, 1050),
    *(918, 986, 797, 923, 975, 815, 1020, 906, 901, 1170, 912, 746, 919, 718, 714, 740),
]


def year(time: str) -> int:
    return int(time[:4])


@pytest.mark.parametrize(
    "detector",
    [
        {"kind": "cusum", "k": 0.5, "h": 5},
        {"kind": "cusum", "k": 0.5, "h": 4, "head_start": 0.5},
        {"kind": "ewma", "lambda": 0.2, "width": 2.962},
    ],
)
def test_the_fall_is_found_and_dated(tmp_path: Path, detector: dict[str, Any]) -> None:
    assert len(FLOWS) == 100
    before = FLOWS[:20]
    configuration = {
        "version": 1,
        "broker": {"host": "localhost"},
        "outputs": {"root": "nile/monitor"},
        "journal": {"path": "nile.db"},
        "characteristics": {
            "flow": {
                "title": "Annual flow of the Nile",
                "unit": "1e8 m³",
                "source": {"topic": "nile/aswan", "payload": "json", "value": "/q", "time": "/t"},
                "subgroup": {"size": 1},
                "baseline": {"mean": fmean(before), "sigma": stdev(before)},
                "detectors": [detector],
            }
        },
    }
    (tmp_path / "c.yaml").write_text(yaml.safe_dump(configuration))
    (tmp_path / "r.csv").write_text(
        "characteristic,time,value\n"
        + "".join(f"flow,{FIRST_YEAR + i}-01-01T00:00:00Z,{q}\n" for i, q in enumerate(FLOWS))
    )
    alerts = tmp_path / "alerts.jsonl"
    files = [str(tmp_path / "c.yaml"), str(tmp_path / "r.csv"), "--alerts", str(alerts)]
    assert main(["play", *files]) == 0
    raised = [json.loads(line) for line in alerts.read_text().splitlines()]
    raised = [event for event in raised if event["event"] == "raised"]
    first = raised[0]
    assert first["direction"] == "down"
    assert 1899 <= year(first["time"]) <= 1903
    shift = first["shift"]
    assert 1897 <= year(shift["onset"]) <= 1900
    assert year(shift["onset_from"]) <= 1899 <= year(shift["onset_to"])
    assert -400 < shift["estimate"] < -150
