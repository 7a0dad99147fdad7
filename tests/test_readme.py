"""Every command in the README runs. Its first two blocks install things: `.ci/run` runs those."""

from __future__ import annotations

import os
import re
import shlex
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import pytest

REPOSITORY = Path(__file__).parents[1]
BLOCKS = re.findall(
    r"^```sh\n(.*?)^```", (REPOSITORY / "README.md").read_text(encoding="utf-8"), re.M | re.S
)
ENVIRONMENT = {
    **os.environ,
    "PATH": f"{Path(sys.executable).parent}{os.pathsep}{os.environ['PATH']}",
    "PYTHONPATH": str(REPOSITORY),
}


def commands() -> list[list[str]]:
    lines = [line for block in BLOCKS[2:] for line in block.splitlines() if line.strip()]
    return [shlex.split(line) for line in lines]


def as_module(words: list[str]) -> list[str]:
    """The installed script's module, so that a checkout can be tested without installing it."""
    module = {"driftbell": "monitor", "driftbell-replay": "replay"}[words[0]]
    return [sys.executable, "-m", module, *words[1:]]


def test_starts_with_the_job_and_its_two_commands() -> None:
    text = (REPOSITORY / "README.md").read_text(encoding="utf-8")
    fences = re.findall(r"^```(\w*)\n(.*?)^```", text, re.M | re.S)
    assert [kind for kind, _ in fences[:2]] == ["sh", "sh"]
    assert all(block.count("\n") == 1 for _, block in fences[:2])
    assert "driftbell demo" in fences[0][1]
    assert "pytest" in fences[1][1]


def test_every_other_command_runs(tmp_path: Path) -> None:
    shutil.copytree(REPOSITORY / "config", tmp_path / "config")
    ran = []
    scene = ["driftbell-replay", "scene", "in-control", "--minutes", "60", "--to"]
    for words in commands():
        ran.append(words[1])
        if words[1] == "run":
            run_and_stop(words, tmp_path)
            continue
        done = subprocess.run(
            as_module(words), cwd=tmp_path, env=ENVIRONMENT, capture_output=True, timeout=60
        )
        assert done.returncode == 0, (words, done.stderr.decode())
        if words[1] == "export":  # nothing was on the line: what follows needs something to read
            filled = as_module([*scene, words[words.index("--to") + 1]])
            subprocess.run(filled, cwd=tmp_path, env=ENVIRONMENT, check=True, capture_output=True)
    assert ran == ["check", "run", "export", "baseline", "tune", "play"]
    assert "sigma: " in (tmp_path / "net-weight.yaml").read_text()
    assert "<html" in (tmp_path / "net-weight.html").read_text()
    assert (tmp_path / "points.csv").read_text().startswith("characteristic,stream,number,")


def run_and_stop(words: list[str], folder: Path) -> None:
    """The daemon goes on until it is told to stop, whether or not a broker is there."""
    daemon = subprocess.Popen(
        as_module(words), cwd=folder, env=ENVIRONMENT, stderr=subprocess.PIPE, text=True
    )
    assert daemon.stderr is not None
    said = ""
    for line in daemon.stderr:
        said += line
        if "connected" in line:
            break
    daemon.send_signal(signal.SIGTERM)
    assert daemon.wait(timeout=10) == 0, said


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md", "config/README.md"])
def test_links_lead_somewhere(document: str) -> None:
    path = REPOSITORY / document
    for target in re.findall(r"\]\(([^)#]+)\)", path.read_text(encoding="utf-8")):
        if "://" not in target:
            assert (path.parent / target).exists(), target
