"""A line with two heads to tune on: its configuration, its recordings, what ``tune`` answers."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from monitor.times import SECOND, format_time, parse_iso_time
from replay.__main__ import main

DOCUMENT: dict[str, Any] = {
    "version": 1,
    "broker": {"host": "localhost"},
    "outputs": {"root": "plant/jar-line-2/monitor"},
    "journal": {"path": "line.db"},
    "characteristics": {
        "net-weight": {
            "title": "Net weight, 340 g jar",
            "unit": "g",
            "resolution": 0.1,
            "source": {
                "topic": "plant/jar-line-2/checkweigher/1/reading",
                "payload": "json",
                "value": "/net",
                "time": "/t",
                "stream": {"head": "/head"},
                "plausible": {"lower": 300, "upper": 380},
                "expected_rate": "60/min",
            },
            "subgroup": {"size": 5, "max_gap": "30s"},
            "baseline": {"mean": 341.2, "sigma": 1.9},
            "detectors": [
                {"kind": "cusum", "k": 0.5, "h": 5},
                {"kind": "shewhart", "chart": "range"},
            ],
        }
    },
}
START = parse_iso_time("2026-03-02T06:00:00Z")
ROWS = 25_000
"""Readings of two heads in turn, one a second: seven hours."""


def recording(path: Path, values: np.ndarray) -> str:
    rows = ["time,head,value"]
    rows += [
        f"{format_time(START + place * SECOND)},{place % 2 + 1},{value:.1f}"
        for place, value in enumerate(values.tolist())
    ]
    path.write_text("\n".join(rows) + "\n")
    return str(path)


def steady(seed: int = 1) -> np.ndarray:
    return np.random.default_rng(seed).normal(341.2, 1.9, ROWS)


def tune(capsys: pytest.CaptureFixture[str], *arguments: str) -> dict[str, Any]:
    assert main(["tune", *arguments, "--json"]) == 0
    found: dict[str, Any] = json.loads(capsys.readouterr().out)
    return found


ASKED = ("--catch", "1.5", "--false-alarm-every", "1d")


def by_name(found: dict[str, Any]) -> dict[str, dict[str, Any]]:
    return {each["name"]: each for each in found["settings"]}
