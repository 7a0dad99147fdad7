"""Detectors come back as they are written: names, presets and what the plan works out."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor.configuration.config import load_measured
from monitor.configuration.resolve import read_plan
from replay.tuning.declared import declared, intents

SECTION: dict[str, Any] = {
    "source": {
        "topic": "plant/jar-line-2/capper/torque",
        "payload": "number",
        "expected_rate": "12/min",
    },
    "subgroup": {"size": 5},
    "promise": {"false_alarm_every": "14d"},
}
DETECTORS: list[dict[str, Any]] = [
    {"kind": "shewhart", "name": "cap", "width": 3.5, "rules": "western-electric-1956"},
    {
        "kind": "shewhart",
        "chart": "median",
        "width": 3,
        "rules": [{"rule": "run", "length": 9}, {"rule": "zone", "count": 2, "of": 3, "width": 2}],
    },
    {"kind": "cusum", "catch": 0.1, "ignore": 0.02, "direction": "up", "share": 2},
    {"kind": "ewma", "lambda": 0.2, "width": 2.962, "after_signal": "hold"},
    {"kind": "cusum", "chart": "variance", "catch_ratio": 1.5},
]


@pytest.mark.parametrize("baseline", [{"mean": 2.05, "sigma": 0.11}, {"learn": 1000}])
def test_they_come_back_as_they_are_written(tmp_path: Path, baseline: dict[str, Any]) -> None:
    path = tmp_path / "line.yaml"
    section = {**SECTION, "baseline": baseline, "detectors": DETECTORS}
    document = {
        "version": 1,
        "broker": {"host": "localhost"},
        "outputs": {"root": "plant/jar-line-2/monitor"},
        "journal": {"path": "line.db"},
        "characteristics": {"cap-torque": section},
    }
    path.write_text(yaml.safe_dump(document))
    [plan] = read_plan(path, {}).characteristics
    found = declared(load_measured(path, {}).characteristics["cap-torque"], plan)
    assert [each.keys for each in found] == DETECTORS
    names = ["cap", "shewhart-median", "cusum", "ewma", "cusum-variance"]
    assert [each.name for each in found] == names
    assert [each.chart for each in found] == ["mean", "median", "mean", "mean", "variance"]
    assert [(each.catch, each.catch_ratio) for each in intents(plan)] == [(0.1, None), (None, 1.5)]
