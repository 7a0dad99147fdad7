"""``driftbell export``: a journal as a recording."""

from __future__ import annotations

import base64
import gzip
import json
import os
import pty
import subprocess
import sys
from pathlib import Path

import journals
import pytest
from daemons import driftbell

from monitor.entries import Connected, Disconnected, Message, Recorded, Started
from monitor.journal import Batch, Journal, read_entries
from monitor.times import SECOND, format_time, parse_iso_time

START = 1_772_433_672 * SECOND

ENTRIES: list[Recorded] = [
    Started(START),
    Connected(START + 1, False),
    Message(START + 2, "a/b", b'{"net":341.6}'),
    Message(START + 3, "a/ä \x00", b'{ "net": 341.6 }'),
    Message(START + 4, "a", b"\xff\x00", True, 0),
    Message(START + 5, "a", b""),
    Disconnected(START + 6),
    Connected(START + 7, True),
]


IMPATIENT = """
import runpy
from monitor import progress
progress._QUIET = 0.0
runpy.run_module("monitor", run_name="__main__")
"""
"""The commands, with no second gone by before they say how far they are."""


@pytest.fixture
def journal(tmp_path: Path) -> Path:
    path = tmp_path / "journal.db"
    journal = Journal(path)
    journal.commit(Batch(ENTRIES))
    journal.close()
    return path


def read(lines: bytes) -> list[Recorded]:
    """The entries in a recording, without the reader that comes with its writer."""
    entries: list[Recorded] = []
    for line in map(json.loads, lines.splitlines()):
        time = parse_iso_time(line["time"])
        match line.get("control"):
            case "started":
                entries.append(Started(time))
            case "connected":
                entries.append(Connected(time, line["session_present"]))
            case "disconnected":
                entries.append(Disconnected(time))
            case None:
                payload = (
                    json.dumps(line["payload"], separators=(",", ":")).encode()
                    if "payload" in line
                    else base64.b64decode(line["payload_base64"])
                )
                flags = line.get("retain", False), line.get("qos", 1)
                entries.append(Message(time, line["topic"], payload, *flags))
            case control:
                raise AssertionError(control)
    return entries


@pytest.mark.parametrize("name", ["x.jsonl", "x.jsonl.gz", "-"])
def test_every_entry_comes_back(journal: Path, tmp_path: Path, name: str) -> None:
    to = name if name == "-" else tmp_path / name
    done = driftbell("export", journal, "--to", to)
    said = b"8 entries, 2026-03-02T06:41:12.000Z to 2026-03-02T06:41:12.000007Z\n"
    assert (done.returncode, done.stderr) == (0, said)
    if name == "-":
        lines = done.stdout
    else:
        assert done.stdout == b""
        content = (tmp_path / name).read_bytes()
        lines = gzip.decompress(content) if name.endswith(".gz") else content
    assert read(lines) == ENTRIES
    first = json.loads(lines.splitlines()[2])
    assert first == {
        "time": "2026-03-02T06:41:12.000002Z",
        "topic": "a/b",
        "payload": {"net": 341.6},
    }


def test_a_journal_in_use_can_be_exported(journal: Path) -> None:
    held = Journal(journal)
    held.commit(Batch([Started(START + 9)]))
    done = driftbell("export", journal)
    assert read(done.stdout) == [*ENTRIES, Started(START + 9)]


def test_says_what_is_wrong(journal: Path, tmp_path: Path) -> None:
    garbage = tmp_path / "garbage.db"
    garbage.write_bytes(b"x" * 10_000)
    for words, code, text in (
        ([tmp_path / "none.db"], 1, "there is no journal at"),
        ([garbage], 1, "file is not a database"),
        ([journal, "--to", tmp_path / "no" / "x.jsonl"], 1, "cannot write"),
        ([journal, "--to", journal], 2, "is the journal itself"),
        ([journal, "--json"], 2, "both want stdout: add --to FILE"),
        ([journal, "--since", "2026-03-02T06:41"], 2, "is no moment: write 2026-03-02T06:41:12Z"),
        ([journal, "--since", "noon"], 2, "'noon' is no moment"),
        ([journal, "--since", "12", "--until", "12"], 2, "--until must be later than --since"),
        ([], 2, "JOURNAL"),
    ):
        done = driftbell("export", *words)
        said = done.stderr.decode()
        assert (done.returncode, text in said, "Traceback" in said) == (code, True, False), said
    held = Journal(journal)
    assert list(read_entries(held.db)) == ENTRIES


def test_a_damaged_journal_leaves_no_half_recording(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    journal = Journal(path)
    journal.commit(Batch([Message(START + n, "a", b"x" * 500) for n in range(5_000)]))
    journal.close()
    content = bytearray(path.read_bytes())
    middle = len(content) // 2 // 4096 * 4096
    content[middle : middle + 40_960] = b"\xff" * 40_960
    path.write_bytes(content)
    done = driftbell("export", path, "--to", tmp_path / "x.jsonl")
    assert done.returncode == 1
    assert f"cannot read {path} to its end" in done.stderr.decode()
    assert not list(tmp_path.glob("*jsonl*"))


def test_shows_how_far_it_is_on_a_terminal(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    journal = Journal(path)
    journal.commit(Batch([Message(START, "a", b"{}")] * 3_000))
    journal.close()
    ours, theirs = pty.openpty()
    with open(theirs, "w") as terminal:
        command = [sys.executable, "-c", IMPATIENT, "export", path, "--to", tmp_path / "x.jsonl"]
        assert subprocess.run(command, stderr=terminal, check=False).returncode == 0
        seen = ""
        while not seen.endswith("\n"):
            seen += os.read(ours, 4096).decode()
    os.close(ours)
    at = "2026-03-02T06:41:12.000Z"
    assert seen == f"\r\x1b[K1,024 entries\r\x1b[K3,000 entries, {at} to {at}\r\n"


def test_a_stretch_says_what_it_begins_with(tmp_path: Path) -> None:
    day = journals.day(seed=1)
    path = journals.write(tmp_path / "j.db", day, (100,))
    to = tmp_path / "x.jsonl"
    since, until = format_time(day[150].time), str(day[200].time / SECOND)
    done = driftbell("export", path, "--since", since, "--until", until, "--to", to, "--json")
    lines = [json.loads(line) for line in to.read_bytes().splitlines()]
    assert json.loads(done.stdout) == {
        "entries": 50,
        "messages": sum(isinstance(each, Message) for each in day[150:200]),
        "first": since,
        "last": format_time(day[199].time),
        "state": format_time(day[149].time),
    }
    assert (lines[0]["control"], lines[0]["time"]) == ("state", format_time(day[149].time))
    assert lines[1]["time"] == since
    assert len(lines) == 51
    done = driftbell("export", path, "--since", "2030-01-01T00:00Z", "--to", to)
    assert done.stderr.decode() == (
        f"0 entries; before them, what was remembered of all that came until "
        f"{format_time(day[-1].time)}\n"
    )


def test_a_pruned_journal_says_how_far_it_reaches(tmp_path: Path) -> None:
    day = journals.day(seed=1)
    path = journals.write(tmp_path / "j.db", day, (100,), dropped=99)
    for words in ([], ["--since", format_time(day[50].time)]):
        done = driftbell("export", path, *words, "--to", tmp_path / "x.jsonl")
        said = done.stderr.decode()
        assert said.startswith(f"{len(day) - 100} entries, {format_time(day[100].time)} to ")
        assert "; the journal reaches back no further; before them, what was remembered" in said


def test_one_characteristic(tmp_path: Path) -> None:
    day = journals.day(seed=1)
    path = journals.write(tmp_path / "j.db", day)
    lines = driftbell("export", path, "--characteristic", "glue").stdout.splitlines()
    read = list(map(json.loads, lines))
    assert {each["topic"] for each in read if "topic" in each} == {"line/glue"}
    plan = next(each["plan"] for each in read if each.get("control") == "config")
    assert [each["name"] for each in plan["characteristics"]] == ["glue"]
    done = driftbell("export", path, "--characteristic", "glu", "--to", tmp_path / "x.jsonl")
    assert (done.returncode, (tmp_path / "x.jsonl").exists()) == (1, False)
    assert done.stderr.decode().endswith("only weight, glue, torque\n")
