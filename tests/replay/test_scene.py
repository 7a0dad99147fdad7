"""``driftbell-replay scene``: recordings that the engine plays, and what is said to be in them."""

from __future__ import annotations

import gzip
import json
import os
import subprocess
import sys
from collections.abc import Callable
from importlib import resources
from pathlib import Path
from string import Template
from typing import Any

import pytest

from monitor.demo import line
from monitor.demo.scenes import SCENES
from monitor.demo.score import elapsed, score
from monitor.messages import AlertEvent
from replay.__main__ import main


def scene(*arguments: str) -> int:
    return main(["scene", *arguments])


@pytest.mark.parametrize("name", SCENES)
def test_a_seed_gives_the_same_bytes_in_every_process(name: str, tmp_path: Path) -> None:
    here, there = tmp_path / "here.jsonl", tmp_path / "there.jsonl"
    words = ["scene", name, "--minutes", "12", "--seed", "5", "--to"]
    assert main([*words, str(here)]) == 0
    for hash_seed in ("1", "2"):
        environment = {**os.environ, "PYTHONHASHSEED": hash_seed}
        command = [sys.executable, "-m", "replay", *words, str(there)]
        subprocess.run(command, check=True, env=environment, stdout=subprocess.DEVNULL)
        assert here.read_bytes() == there.read_bytes()


def test_another_seed_gives_other_bytes(tmp_path: Path) -> None:
    paths = [tmp_path / "1.jsonl", tmp_path / "2.jsonl"]
    for seed, path in enumerate(paths):
        assert scene("demo", "--minutes", "1", "--seed", str(seed), "--to", str(path)) == 0
    assert paths[0].read_bytes() != paths[1].read_bytes()


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


def test_help_names_every_scene() -> None:
    command = [sys.executable, "-m", "replay", "scene", "--help"]
    shown = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    lines = [line.split(maxsplit=1) for line in shown.partition("scenes:\n")[2].splitlines()]
    assert [name for name, _ in lines] == list(SCENES)
    assert all(title.startswith(SCENES[name].title) for name, title in lines)


# ── played ───────────────────────────────────────────────────────────────────────────────────────

Played = tuple[Path, dict[str, Any], list[AlertEvent]]
"""The recording, what play counts in it, and the alerts raised."""


@pytest.fixture
def played(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> Callable[[str], Played]:
    """Plays a scene under the demo's own configuration."""
    config = tmp_path / "jar-line-2.yaml"
    template = resources.files("monitor.demo").joinpath("jar-line-2.yaml").read_text("utf-8")
    values = {"host": "localhost", "port": 1883, "client_id": "x", "prefix": line.PREFIX}
    config.write_text(Template(template).substitute(values), "utf-8")

    def played(name: str) -> Played:
        recording, alerts = tmp_path / f"{name}.jsonl", tmp_path / "alerts.jsonl"
        assert scene(name, "--to", str(recording)) == 0
        capfd.readouterr()
        words = ["play", str(config), str(recording), "--alerts", str(alerts), "--json"]
        assert main(words) == 0
        events = [json.loads(each) for each in alerts.read_text().splitlines()]
        raised = [event for event in events if event["event"] == "raised"]
        return recording, json.loads(capfd.readouterr().out), raised

    return played


@pytest.mark.parametrize("name", [name for name in SCENES if name != "autocorrelated"])
def test_the_demo_s_configuration_finds_what_each_scene_puts_in(
    name: str, played: Callable[[str], Played]
) -> None:
    _, counts, raised = played(name)
    assert counts["unreadable"] == 0
    findings, false = score(SCENES[name].causes, raised)
    assert [finding.alert is not None for finding in findings] == [True] * len(findings)
    # What varies more also strays further: alerts of the mean follow one of the spread.
    spread = any(cause.kind == "spread" for cause in SCENES[name].causes)
    assert not false or (spread and all(elapsed(event) > 600 for event in false))


def test_a_wandering_fill_rings_again_and_again(played: Callable[[str], Played]) -> None:
    """Textbook intervals hold for independent means; common knowledge of the method."""
    _, counts, raised = played("autocorrelated")
    assert len(raised) >= 5
    assert set(counts["set_aside"]) <= {"not-used"}


def test_what_the_gateway_repeats_reorders_and_loses_is_counted(
    played: Callable[[str], Played],
) -> None:
    recording, counts, _ = played("gateway")
    seen: set[int] = set()
    newest: dict[int, int] = {}
    repeated = late = overtaken = 0
    for text in recording.read_text().splitlines():
        message = json.loads(text)
        if not message["topic"].endswith("/checkweigher/1/reading"):
            continue
        number, head = message["payload"]["n"], message["payload"]["head"]
        repeated += number in seen
        late += number not in seen and number < newest.get(head, 0)
        overtaken += number not in seen and number < max(seen, default=0)
        seen.add(number)
        newest[head] = max(number, newest.get(head, 0))
    lost = max(seen) - len(seen)
    assert counts["set_aside"]["repeated"] == repeated > 100
    assert counts["set_aside"]["late"] == late > 50
    # What was overtaken had been counted as missing before it came.
    assert counts["missing"] == lost + overtaken
    assert lost > (45 + 5) * 10  # the two outages, at ten jars a second
