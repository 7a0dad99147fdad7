"""``driftbell-replay scene``: recordings that the engine plays, and what is said to be in them."""

from __future__ import annotations

import gzip
import json
import os
import subprocess
import sys
from importlib import resources
from pathlib import Path
from string import Template
from typing import Any

import pytest

from monitor.demo import line
from monitor.demo.scenes import SCENES
from monitor.demo.score import elapsed, score
from monitor.engine import Engine
from monitor.outputs import Alert
from monitor.resolve import read_settings
from replay.__main__ import main


def scene(*arguments: str) -> int:
    return main(["scene", *arguments])


def test_a_seed_gives_the_same_bytes_in_every_process(tmp_path: Path) -> None:
    paths = [tmp_path / f"{name}.jsonl" for name in ("here", "there", "other")]
    assert scene("gateway", "--minutes", "2", "--seed", "5", "--to", str(paths[0])) == 0
    command = [sys.executable, "-m", "replay", "scene", "gateway", "--minutes", "2"]
    subprocess.run([*command, "--seed", "5", "--to", str(paths[1])], check=True)
    subprocess.run([*command, "--seed", "6", "--to", str(paths[2])], check=True)
    here, there, other = (path.read_bytes() for path in paths)
    assert here == there != other


def test_compressed_and_on_stdout_it_is_the_same(
    tmp_path: Path, capfdbinary: pytest.CaptureFixture[bytes]
) -> None:
    packed = tmp_path / "demo.jsonl.gz"
    assert scene("demo", "--minutes", "1", "--to", str(packed)) == 0
    capfdbinary.readouterr()
    assert scene("demo", "--minutes", "1", "--to", "-") == 0
    assert capfdbinary.readouterr().out == gzip.decompress(packed.read_bytes())


def test_it_says_what_was_put_in(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "demo.jsonl"
    assert scene("demo", "--to", str(path)) == 0
    assert capsys.readouterr().out.splitlines() == [
        f"{path}: 8,071 messages; one head of six drifts, and the capping torque loosens",
        "  fill head 4 drifts up: from 2026-03-02T06:04:00.000Z, growing over 240 s, to +2 g",
        "  capping torque loosens: from 2026-03-02T06:06:00.000Z, growing over 180 s, to −0.15 N·m",
    ]
    assert scene("demo", "--to", str(path), "--json", "--minutes", "5") == 0
    assert json.loads(capsys.readouterr().out) == {
        "scene": "demo",
        "seed": 1,
        "messages": 3364,
        "causes": [  # the torque loosens only after five minutes
            {
                "cause": "fill head 4 drifts up",
                "characteristic": "net-weight",
                "head": 4,
                "kind": "shift",
                "direction": "up",
                "onset": "2026-03-02T06:04:00.000Z",
                "growth": 240.0,
                "size": 2.0,
            }
        ],
    }


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["nonsense", "--to", "x.jsonl"], "invalid choice"),
        (["demo"], "--to"),
        (["demo", "--to", "x.csv"], "must end in .jsonl"),
        (["demo", "--to", "x.jsonl", "--seed", "-1"], "write 0 or more"),
        (["demo", "--to", "x.jsonl", "--minutes", "0"], "write more than 0"),
        (["demo", "--to", "x.jsonl", "--minutes", "inf"], "write more than 0"),
    ],
)
def test_a_wrong_command_line_ends_with_2(
    arguments: list[str], words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    try:
        status = scene(*arguments)
    except SystemExit as ended:
        status = ended.code
    assert status == 2
    assert words in capsys.readouterr().err


@pytest.fixture(scope="module")
def demo_engine(tmp_path_factory: pytest.TempPathFactory) -> Any:
    """Makes engines with the demo's own configuration."""
    path = tmp_path_factory.mktemp("demo") / "jar-line-2.yaml"
    template = resources.files("monitor.demo").joinpath("jar-line-2.yaml").read_text("utf-8")
    values = {"host": "localhost", "port": 1883, "client_id": "x", "prefix": line.PREFIX}
    path.write_text(Template(template).substitute(values), "utf-8")
    plan = read_settings(path, os.environ).plan
    return lambda: Engine(plan, points=False)


@pytest.mark.parametrize("name", [name for name in SCENES if name != "autocorrelated"])
def test_the_demo_s_configuration_finds_what_each_scene_puts_in(
    name: str, demo_engine: Any
) -> None:
    engine = demo_engine()
    messages = line.messages(SCENES[name], 1)
    outputs = [output for message in messages for output in engine.fold(message)]
    raised = [o.event for o in outputs if isinstance(o, Alert) and o.event["event"] == "raised"]
    findings, false = score(SCENES[name].causes, raised)
    assert [finding.alert is not None for finding in findings] == [True] * len(findings)
    # What varies more also strays further: alerts of the mean follow one of the spread.
    spread = any(cause.kind == "spread" for cause in SCENES[name].causes)
    assert not false or (spread and all(elapsed(event) > 600 for event in false))


def test_a_wandering_fill_rings_again_and_again(demo_engine: Any) -> None:
    """Textbook intervals hold for independent means; common knowledge of the method."""
    engine = demo_engine()
    messages = line.messages(SCENES["autocorrelated"], 1)
    alerts = [o for m in messages for o in engine.fold(m) if isinstance(o, Alert)]
    assert sum(alert.event["event"] == "raised" for alert in alerts) >= 5
