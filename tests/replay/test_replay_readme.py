"""replay/README.md: every example runs and says what is shown, and every option is in it."""

from __future__ import annotations

import json
import os
import re
import shlex
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from brokers import Embedded

from monitor.demo.broker import HOST
from monitor.demo.scenes import SCENES
from monitor.entries import Message
from monitor.journal import Batch, Journal
from replay.__main__ import COMMANDS
from replay.lines import ControlError, decode_line
from replay.points import HEADER

REPOSITORY = Path(__file__).parents[2]
TEXT = (REPOSITORY / "replay" / "README.md").read_text(encoding="utf-8")
FENCES = re.findall(r"(?:`([\w.]+)`:\n\n)?^```(\w+)\n(.*?)^```", TEXT, re.M | re.S)


def section(title: str) -> str:
    """The text under a heading, with all that stands under lower ones."""
    heading = re.search(rf"^(#+) {re.escape(title)}$", TEXT, re.M)
    assert heading is not None, title
    below = TEXT[heading.end() :]
    following = re.search(rf"^#{{1,{len(heading[1])}}} ", below, re.M)
    return below[: following.start()] if following else below


def first_cells(title: str) -> list[str]:
    """What stands in backquotes in the first column of the section's tables."""
    rows = re.findall(r"^\| ([^|]*) \|", section(title), re.M)
    return [word for row in rows for word in re.findall(r"`([^`]+)`", row)]


def run(words: list[str], folder: Path) -> str:
    assert words[0] == "driftbell-replay"
    done = subprocess.run(
        [sys.executable, "-m", "replay", *words[1:]],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(REPOSITORY), "COLUMNS": "120"},
        capture_output=True,
        text=True,
        timeout=60,
    )
    assert done.returncode == 0, (words, done.stderr)
    return done.stdout


@pytest.fixture
def embedded(tmp_path: Path) -> Iterator[Embedded]:
    broker = Embedded(tmp_path)
    broker.start()
    yield broker
    broker.stop()


def test_every_example_runs_and_says_what_is_shown(tmp_path: Path, embedded: Embedded) -> None:
    shutil.copytree(REPOSITORY / "config", tmp_path / "config")
    journal = Journal(tmp_path / "line.db")
    journal.commit(Batch([Message(0, "plant/jar-line-2/capper/torque", b"2.05")]))
    journal.close()
    ran, said = [], ""
    for name, kind, body in FENCES:
        if name:
            (tmp_path / name).write_text(body)
        elif kind == "sh":
            for line in body.splitlines():
                line = line.replace("localhost:1885", f"{HOST}:{embedded.port}")
                words = shlex.split(line)
                said = run(words, tmp_path)
                ran.append(words[1])
                if "--json" in words:
                    assert json.loads(said)["unreadable"] == 0
        else:
            assert kind == "text"
            for line in body.splitlines():
                pattern = r"\s+".join(map(re.escape, line.split())).replace("…", ".+")
                assert re.search(rf"^\s*{pattern}", said, re.M), (line, said)
    assert set(ran) == set(COMMANDS)


@pytest.mark.parametrize("name", ["messages.jsonl", "torque.csv", "old.csv"])
def test_every_reading_of_the_examples_is_used(tmp_path: Path, name: str) -> None:
    [(body, options)] = [
        (body, re.findall(rf" {name} (--column .*)$", TEXT, re.M))
        for fence, _, body in FENCES
        if fence == name
    ]
    (tmp_path / name).write_text(body)
    config = str(REPOSITORY / "config" / "jar-line-2.yaml")
    columns = shlex.split(options[0]) if options else []
    said = run(["driftbell-replay", "play", config, name, "--json", *columns], tmp_path)
    counts = json.loads(said)
    assert counts["set_aside"] == {}
    assert counts["readings"] == {"messages.jsonl": 3, "torque.csv": 2, "old.csv": 1}[name]


@pytest.mark.parametrize("command", COMMANDS)
def test_every_option_is_explained_and_none_that_is_not_there(command: str, tmp_path: Path) -> None:
    shown = run(["driftbell-replay", command, "--help"], tmp_path)
    options = set(re.findall(r"--[a-z][a-z-]*", shown.partition("options:")[2])) - {"--help"}
    others = rf"^driftbell-replay (?!{command} ).*$|`driftbell [^`]*`"
    text = re.sub(others, "", section(command), flags=re.M)
    explained = set(re.findall(r"(?<![\w-])--[a-z][a-z-]*", text))
    assert explained == options


def test_points_columns_are_those_that_are_written() -> None:
    assert first_cells("Points") == HEADER.decode().strip().split(",")


def test_counts_are_those_that_are_given(tmp_path: Path) -> None:
    (tmp_path / "a.jsonl").write_text('{"time":0,"topic":"a","payload":1}')
    config = str(REPOSITORY / "config" / "jar-line-2.yaml")
    said = run(["driftbell-replay", "play", config, "a.jsonl", "--json"], tmp_path)
    assert sorted(first_cells("Counts")) == sorted([*json.loads(said), "--json"])


def test_scenes_are_those_that_there_are() -> None:
    rows = re.findall(r"^\| `([\w-]+)` \| (.*) \|$", section("scene"), re.M)
    assert rows == [(scene.name, scene.title) for scene in SCENES.values()]


def test_control_words_are_those_that_are_followed() -> None:
    words = first_cells("Messages: .jsonl, .jsonl.gz")
    known = words[words.index("control") + 1 :]
    said = r"'other' is unknown: (.*) or (\w+)$"
    with pytest.raises(ControlError, match=said) as error:
        decode_line(b'{"time":0,"control":"other"}')
    found = re.search(said, str(error.value))
    assert found is not None
    assert sorted(known) == sorted([*found[1].split(", "), found[2]])


def test_links_lead_somewhere() -> None:
    headings = {title.lower() for title in re.findall(r"^#+ (.+)$", TEXT, re.M)}
    for target in re.findall(r"\]\(([^)]+)\)", TEXT):
        assert target.removeprefix("#") in headings
