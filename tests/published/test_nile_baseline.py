"""The annual flow of the Nile once more, as a baseline: its first lag of autocorrelation is printed
by many textbooks as 0.50 (R's acf(Nile): 0.498, from memory), all of which is a change of level: by
G. W. Cobb 1978, Biometrika 65, after 1898, from a mean of 1097.75 to one of 849.97 (from memory).
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import yaml
from test_nile import FIRST_YEAR, FLOWS

from monitor.methods.autocorrelation import correlations
from replay.__main__ import main


def test_the_first_lag_is_the_printed_one() -> None:
    assert correlations([np.array(FLOWS, np.float64)], 1)[1] == pytest.approx(0.498, abs=5e-4)


def test_the_change_of_level_is_found(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    flow = {
        "source": {"topic": "nile/aswan", "payload": "json", "value": "/q", "time": "/t"},
        "detectors": [{"kind": "cusum", "k": 0.5, "h": 5}],
    }
    config = tmp_path / "c.yaml"
    config.write_text(yaml.safe_dump({"version": 1, "characteristics": {"flow": flow}}))
    recording = tmp_path / "r.csv"
    rows = [f"{FIRST_YEAR + i}-01-01T00:00:00Z,{q}" for i, q in enumerate(FLOWS)]
    recording.write_text("\n".join(["time,value", *rows]) + "\n")

    assert main(["baseline", str(config), str(recording), "--json"]) == 1

    found = json.loads(capsys.readouterr().out)
    (reason,) = found["reasons"]
    assert {"kind": "moved", "grade": "refuse"}.items() <= reason.items()
    assert "--leave-out 1871-01-01T00:00:00Z/1898-01-01T00:00:00Z" in reason["do"]
    (moved,) = found["moved"]
    assert moved["time"] == "1899-01-01T00:00:00.000Z"
    assert moved["by"] == pytest.approx(849.97 - 1097.75, abs=0.01)
    assert moved["share"] == 0.28
    # With the two levels taken out years hardly follow each other.
    (stream,) = found["streams"]
    assert stream["effective"] == pytest.approx(100, abs=10)
    assert found["baseline"]["mean"] == pytest.approx(np.mean(FLOWS), rel=1e-3)
