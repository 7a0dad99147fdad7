"""Files as recordings: by their names, compressed or not, whole or not."""

from __future__ import annotations

import gzip
import itertools
import os
from contextlib import suppress
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from monitor.commandline import COULD_NOT, WRONG, CommandError
from monitor.entries import Entry, Message, Reading
from replay.recordings import Recording
from replay.tables import Layout

LINE = b'{"time":1772433672.35,"topic":"plant/a","payload":1}\n'
TABLE = "characteristic,value,head\na,1,Düse 4\n".encode()


def entries(path: Path) -> list[Entry]:
    layout = Layout(("head",), {}, None)
    recording = Recording(str(path))
    return [entry for _, entry in recording.entries(layout, itertools.count(), lambda *_: None)]


def write(path: Path, content: bytes) -> Path:
    path.write_bytes(gzip.compress(content) if path.suffix.lower() == ".gz" else content)
    return path


@pytest.mark.parametrize("name", ["a.jsonl", "a.jsonl.gz", "A.JSONL.GZ"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
def test_messages(tmp_path: Path, name: str, mark: bytes) -> None:
    path = write(tmp_path / name, mark + LINE)
    assert entries(path) == [Message(1_772_433_672_350_000, "plant/a", b"1")]


@pytest.mark.parametrize("name", ["a.csv", "a.csv.gz", "A.CSV"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
def test_tables(tmp_path: Path, name: str, mark: bytes) -> None:
    path = write(tmp_path / name, mark + TABLE)
    assert entries(path) == [Reading(0, "a", {"head": "Düse 4"}, 1.0, 0.0)]


def test_an_older_encoding_stays_readable_and_what_differs_stays_different(tmp_path: Path) -> None:
    text = "characteristic,value,head\na,1,Düse\na,1,Döse\n"
    path = write(tmp_path / "a.csv", text.encode("latin-1"))
    heads = [entry.stream["head"] for entry in entries(path) if isinstance(entry, Reading)]
    assert heads == [r"D\xfcse", r"D\xf6se"]


@pytest.mark.parametrize(
    ("name", "content", "why", "code"),
    [
        ("a.txt", b"", "a recording's name ends in .jsonl or .csv", COULD_NOT),
        ("a", b"", "a recording's name ends in .jsonl or .csv", COULD_NOT),
        ("a.gz", b"", "a recording's name ends in .jsonl or .csv", COULD_NOT),
        ("a.db", b"", "playing a journal is not built yet; driftbell export", WRONG),
        ("a.csv", "a,b".encode("utf-16"), "is UTF-16 text: save it as UTF-8", COULD_NOT),
    ],
)
def test_what_cannot_be_read_is_refused_before_anything_is_played(
    tmp_path: Path, name: str, content: bytes, why: str, code: int
) -> None:
    (tmp_path / name).write_bytes(content)
    with pytest.raises(CommandError) as error:
        Recording(str(tmp_path / name))
    assert str(tmp_path / name) in str(error.value)
    assert why in str(error.value)
    assert error.value.code == code


def test_a_plain_file_called_gz_is_refused(tmp_path: Path) -> None:
    (tmp_path / "a.jsonl.gz").write_bytes(LINE)
    with pytest.raises(CommandError, match="is not gzip data"):
        Recording(str(tmp_path / "a.jsonl.gz"))


def test_a_missing_file_is_named(tmp_path: Path) -> None:
    with pytest.raises(CommandError, match=r"cannot read .*a\.csv: No such file or directory"):
        Recording(str(tmp_path / "a.csv"))


def test_a_folder_is_no_recording(tmp_path: Path) -> None:
    (tmp_path / "a.jsonl").mkdir()
    with pytest.raises(CommandError, match="Is a directory"):
        entries(tmp_path / "a.jsonl")


def test_compressed_data_that_ends_early_is_said(tmp_path: Path) -> None:
    whole = gzip.compress(LINE * 1000)
    (tmp_path / "a.jsonl.gz").write_bytes(whole[:-20])
    with pytest.raises(CommandError, match="ends in the middle of its compressed data"):
        entries(tmp_path / "a.jsonl.gz")


def test_compressed_data_that_is_damaged_is_said(tmp_path: Path) -> None:
    whole = bytearray(gzip.compress(LINE + os.urandom(5000)))
    whole[2000] ^= 0xFF
    (tmp_path / "a.jsonl.gz").write_bytes(whole)
    with pytest.raises(CommandError, match="to its end"):
        entries(tmp_path / "a.jsonl.gz")


def test_it_knows_how_far_it_is(tmp_path: Path) -> None:
    path = write(tmp_path / "a.jsonl", LINE * 50_000)
    recording = Recording(str(path))
    assert recording.fraction() == 0.0
    seen = [
        recording.fraction()
        for _ in recording.entries(Layout((), {}, None), itertools.count(), lambda *_: None)
    ]
    assert seen == sorted(seen)
    assert 0.0 < seen[0] < 0.5
    assert seen[-1] == 1.0


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.sampled_from(["x.jsonl", "x.csv", "x.jsonl.gz", "x.csv.gz"]), st.binary(max_size=300))
def test_no_bytes_crash_it(tmp_path: Path, name: str, content: bytes) -> None:
    for data in (content, gzip.compress(content) if name.endswith(".gz") else LINE + content):
        (tmp_path / name).write_bytes(data)
        with suppress(CommandError):
            entries(tmp_path / name)
