"""The annual flow of the Nile once more, as a baseline: its first lag of autocorrelation is printed
by many textbooks as 0.50 (R's acf(Nile): 0.498, from memory), and a hundred years with a change of
level in them (G. W. Cobb 1978, Biometrika 65) are worth only a few independent ones.
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


def test_a_hundred_years_are_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
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
    assert {"kind": "few", "grade": "refuse"}.items() <= found["reasons"][0].items()
    assert "following" in {reason["kind"] for reason in found["reasons"]}
    (stream,) = found["streams"]
    assert stream["effective"] < 20
    assert found["baseline"]["mean"] == pytest.approx(np.mean(FLOWS), rel=1e-3)
    assert found["promise"]["unlucky"] < 0.2
