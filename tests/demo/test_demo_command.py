"""``driftbell demo`` as people run it: a process on a real broker, to its end."""

from __future__ import annotations

import json
import os
import re
import shlex
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
import yaml
from brokers import HOST, TIMEOUT, Broker, Client

from monitor.configuration.resolve import read_settings
from monitor.demo import line
from monitor.demo.scenes import SCENES
from monitor.demo.score import score
from monitor.engine import Engine
from monitor.outputs import Alert

DEMO = [sys.executable, "-m", "monitor", "demo", "--seconds", "5"]


@pytest.fixture
def environment(tmp_path: Path) -> dict[str, str]:
    """Where the demo leaves its files, and a width that wraps nothing."""
    return {**os.environ, "TMPDIR": str(tmp_path), "COLUMNS": "100"}


def run(command: list[str], environment: dict[str, str]) -> subprocess.CompletedProcess[str]:
    return subprocess.run(command, env=environment, capture_output=True, text=True, timeout=120)


def seconds(face: str) -> int:
    hours, minutes, rest = map(int, face.split(":"))
    return hours * 3_600 + minutes * 60 + rest


def test_finds_both_causes_and_nothing_else(environment: dict[str, str]) -> None:
    demo = run(DEMO, environment)
    assert demo.returncode == 0, demo.stderr
    assert demo.stderr == ""
    words = " ".join(demo.stdout.split())
    assert words.count("Net weight, lane 1 head 4, has risen by about") == 1
    assert words.count("Capping torque has fallen by about") == 1
    assert "Check fill head 4 for drips or a slow valve. Isolate and lock out" in words
    assert re.search(r"fill head 4 drifts up \S+ \d+ s, \d+ readings \+0\.\d+ g \+0\.\d+ g", words)
    assert re.search(r"capping torque loosens \S+ \d+ s, \d+ readings −0\.\d+ N·m", words)
    told = re.findall(r"(\S+) (?:Net|Capping) .*? since about (?:\S+ )?(\S+) UTC", words)
    assert len(told) == 2
    for found, onset in told:  # within the line's twelve minutes, and over midnight too
        assert 0 < (seconds(found) - seconds(onset)) % 86_400 < 720
    assert "False alarms: none." in words
    assert "Messages: 8,071 sent, 8,071 read; set aside: 7 repeated." in words


def test_what_it_says_to_try_next_works(environment: dict[str, str], tmp_path: Path) -> None:
    demo = run(DEMO, environment)
    _, steps = demo.stdout.split("What to try next\n")
    commands = [line for line in steps.splitlines() if not line.strip().startswith("#")]
    assert len(commands) == 3
    for command in commands:
        tried = run(shlex.split(command), environment)
        assert tried.returncode == 0, (command, tried.stderr)
    (folder,) = tmp_path.glob("driftbell-demo-*")
    assert (folder / "points.csv").stat().st_size > 0


def test_json_is_one_object_and_the_broker_is_left_clean(
    broker: Broker, environment: dict[str, str]
) -> None:
    demo = run([*DEMO, "--json", "--broker", f"{HOST}:{broker.port}"], environment)
    assert demo.returncode == 0, demo.stderr
    told = json.loads(demo.stdout)
    assert [cause["found"] for cause in told["causes"]] == [True, True]
    assert told["false_alarms"] == []
    assert told["messages"] == {"sent": 8071, "read": 8071, "set_aside": {"repeated": 7}}

    configuration = yaml.safe_load((Path(told["folder"]) / "jar-line-2.yaml").read_text())
    with Client(broker.port) as client:
        client.subscribe("#")
        client.publish("end", b"")
        assert [m.topic for m in client.wait_for(lambda ms: ms[-1:] and ms[-1].topic == "end")] == [
            "end"
        ]
    with Client(broker.port, configuration["broker"]["client_id"], clean=False) as back:
        assert not back.session_present


def test_finds_live_what_the_engine_finds_in_the_scene_of_that_seed(
    environment: dict[str, str],
) -> None:
    told = json.loads(run([*DEMO, "--json", "--seed", "3"], environment).stdout)
    settings = read_settings(Path(told["folder"]) / "jar-line-2.yaml", environment)
    engine = Engine(settings.plan, points=False)
    outputs = [o for m in line.messages(SCENES["demo"], 3) for o in engine.fold(m)]
    raised = [o.event for o in outputs if isinstance(o, Alert) and o.event["event"] == "raised"]
    findings, _ = score(SCENES["demo"].causes, raised)
    assert [cause["readings"] for cause in told["causes"]] == [f.readings for f in findings]


@pytest.fixture
def running(environment: dict[str, str]) -> Iterator[subprocess.Popen[str]]:
    """A demo that would go on for a minute, once it has said its opening words."""
    command = [*DEMO[:-1], "60"]
    demo = subprocess.Popen(
        command, env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    assert demo.stdout is not None
    for words in demo.stdout:
        if words.startswith("Broker:"):
            break
    yield demo
    if demo.poll() is None:
        demo.kill()
    demo.communicate()


def children(process: subprocess.Popen[str]) -> dict[str, int]:
    """Process ids of the broker and the daemon, by the module they run."""
    found = {}
    for child in Path(f"/proc/{process.pid}/task/{process.pid}/children").read_text().split():
        words = Path(f"/proc/{child}/cmdline").read_text().split("\0")
        found[words[words.index("-m") + 1]] = int(child)
    return found


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_stops_early_in_order(running: subprocess.Popen[str], number: signal.Signals) -> None:
    started = children(running)
    assert set(started) == {"monitor.demo.broker", "monitor"}
    running.send_signal(number)
    words, errors = running.communicate(timeout=TIMEOUT)
    assert running.returncode == 0, errors
    assert "Stopped early" in words
    assert errors == ""
    for child in started.values():
        assert not Path(f"/proc/{child}").exists()


def test_says_so_when_the_daemon_dies(running: subprocess.Popen[str]) -> None:
    os.kill(children(running)["monitor"], signal.SIGKILL)
    _, errors = running.communicate(timeout=TIMEOUT)
    assert running.returncode == 1
    assert "the daemon ended with status -9" in errors
    assert "Traceback" not in errors


@pytest.mark.parametrize(
    ("arguments", "status", "words"),
    [
        (["--seconds", "1"], 2, "write 5 or more"),
        (["--seconds", "nan"], 2, "write 5 or more"),
        (["--seconds", "inf"], 2, "write 5 or more"),
        (["--seed", "-1"], 2, "write 0 or more"),
        (["--broker", "here"], 1, "no broker answers at here:1883"),
        (["--broker", "here:x"], 2, "write localhost:1883"),
        (["--broker", f"{HOST}:1"], 1, "is it running"),
    ],
)
def test_refuses_with_a_sentence(
    arguments: list[str], status: int, words: str, environment: dict[str, str]
) -> None:
    demo = run([*DEMO, *arguments], environment)
    assert demo.returncode == status
    assert words in demo.stderr
    assert "Traceback" not in demo.stderr
