"""Configurations whose baselines are still to come."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_plan

SOURCE = {"topic": "plant/scale", "payload": "number"}


def written(tmp_path: Path, **characteristics: Any) -> Path:
    path = tmp_path / "line.yaml"
    path.write_text(yaml.safe_dump({"version": 1, "characteristics": characteristics}))
    return path


@pytest.mark.parametrize(
    "baseline",
    [{}, {"baseline": {"file": "none.yaml"}}, {"baseline": {"learn": 1000}}, {"baseline": 7}],
)
def test_no_baseline_is_missed(tmp_path: Path, baseline: dict[str, Any]) -> None:
    path = written(tmp_path, weight={"source": SOURCE, "subgroup": {"size": 3}, **baseline})

    (plan,) = read_plan(path, {}, {}).characteristics
    assert plan.source.topic == "plant/scale"
    with pytest.raises(ConfigurationError):
        read_plan(path, {})


def test_what_is_given_is_judged_by(tmp_path: Path) -> None:
    weight = {
        "source": SOURCE | {"expected_rate": "1/s"},
        "promise": {"false_alarm_every": "1d"},
        "detectors": [{"kind": "cusum", "catch": 2.0}],
    }
    path = written(tmp_path, weight=weight, torque={"source": SOURCE | {"topic": "plant/cap"}})

    plan = read_plan(path, {}, {"weight": {"mean": 340.0, "sigma": 1.5}})
    plans = {each.name: each for each in plan.characteristics}
    judgement = plans["weight"].judgement
    assert judgement is not None
    assert (judgement.baseline.mean, judgement.baseline.sigma) == (340.0, 1.5)
    assert judgement.detectors[0].kind == "cusum"
    assert plans["torque"].judgement is not None  # a stand-in, that nothing is judged by


def test_everything_else_is_checked_as_ever(tmp_path: Path) -> None:
    path = written(tmp_path, weight={"source": SOURCE | {"topic": "#/a"}, "subgroup": {"sise": 3}})

    with pytest.raises(ConfigurationError) as caught:
        read_plan(path, {}, {})
    assert [problem.key.rsplit(".", 1)[-1] for problem in caught.value.problems] == [
        "topic",
        "sise",
    ]
    path.write_text("version: 1\ncharacteristics: 7\n")
    with pytest.raises(ConfigurationError):
        read_plan(path, {}, {})
