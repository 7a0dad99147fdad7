"""Files as recordings: by their names, compressed or not, whole or not."""

from __future__ import annotations

import gzip
import itertools
import os
import sqlite3
from collections.abc import Iterator
from contextlib import suppress
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from monitor.commandline import COULD_NOT, CommandError
from monitor.entries import Entry, Message, Parsed, Reading, Started, State
from monitor.journal import Batch, Journal
from replay.recordings import Chunk, Recording
from replay.tables import Layout

LINE = b'{"time":1772433672.35,"topic":"plant/a","payload":1}\n'
TABLE = "characteristic,value,head\na,1,Düse 4\n".encode()


def chunks(recording: Recording) -> Iterator[Chunk]:
    layout = Layout(("head",), {}, None)
    return recording.open(layout, itertools.count(), lambda *_: None).chunks


def entries(path: Path) -> list[Entry | State]:
    held = [entry for chunk in chunks(Recording(str(path))) for entry in chunk.entries]
    return [entry for entry in held if entry is not None]


def write(path: Path, content: bytes) -> Path:
    path.write_bytes(gzip.compress(content) if path.suffix.lower() == ".gz" else content)
    return path


@pytest.mark.parametrize("name", ["a.jsonl", "a.jsonl.gz", "A.JSONL.GZ"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
def test_messages(tmp_path: Path, name: str, mark: bytes) -> None:
    path = write(tmp_path / name, mark + LINE)
    assert entries(path) == [Parsed(1_772_433_672_350_000, "plant/a", 1)]


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
    ("name", "content", "why"),
    [
        ("a.txt", b"", "a recording's name ends in .jsonl or .csv"),
        ("a", b"", "a recording's name ends in .jsonl or .csv"),
        ("a.gz", b"", "a recording's name ends in .jsonl or .csv"),
        ("a.db.gz", b"\x1f\x8b", "a recording's name ends in .jsonl or .csv"),
        ("a.db", LINE, "file is not a database"),
        ("a.csv", "a,b".encode("utf-16"), "is UTF-16 text: save it as UTF-8"),
    ],
)
def test_what_cannot_be_read_is_refused_before_anything_is_played(
    tmp_path: Path, name: str, content: bytes, why: str
) -> None:
    (tmp_path / name).write_bytes(content)
    with pytest.raises(CommandError) as error:
        Recording(str(tmp_path / name))
    assert str(tmp_path / name) in str(error.value)
    assert why in str(error.value)
    assert error.value.code == COULD_NOT


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
    whole = bytearray(gzip.compress(LINE * 1000 + os.urandom(500_000)))
    whole[-2000] ^= 0xFF
    (tmp_path / "a.jsonl.gz").write_bytes(whole)
    with pytest.raises(CommandError, match="to its end"):
        entries(tmp_path / "a.jsonl.gz")


def test_it_knows_how_far_it_is(tmp_path: Path) -> None:
    path = write(tmp_path / "a.jsonl", LINE * 50_000)
    recording = Recording(str(path))
    assert recording.fraction() == 0.0
    seen = [recording.fraction() for _ in chunks(recording)]
    assert seen == sorted(seen)
    assert 0.0 < seen[0] < 0.5
    assert seen[-1] == 1.0


def test_every_line_keeps_its_number(tmp_path: Path) -> None:
    lines = [LINE if number % 7 else b"\n" for number in range(1, 5001)]
    path = write(tmp_path / "a.jsonl", b"".join(lines))
    numbers = [
        number
        for chunk in chunks(Recording(str(path)))
        for number, entry in enumerate(chunk.entries, chunk.first)
        if entry is not None
    ]
    assert numbers == [number for number in range(1, 5001) if number % 7]


def test_every_row_keeps_the_number_of_the_line_it_ends_on(tmp_path: Path) -> None:
    rows = "".join(f'a,{number},"over\ntwo lines"\n' for number in range(2000))
    path = write(tmp_path / "a.csv", f"characteristic,value,head\n{rows}".encode())
    numbers = [
        number
        for chunk in chunks(Recording(str(path)))
        for number, entry in enumerate(chunk.entries, chunk.first)
        if entry is not None
    ]
    assert numbers == [*range(3, 4002, 2)]


def test_a_journal_also_while_it_is_written(tmp_path: Path) -> None:
    held = [Started(1), Message(2, "plant/a", b"\xff", True, 0), Message(3, "plant/a", b"1.0")]
    journal = Journal(tmp_path / "a.db")
    journal.commit(Batch(held))
    reading = chunks(Recording(str(tmp_path / "a.db")))
    first = next(reading)
    journal.commit(Batch([Message(4, "plant/a", b"2")]))
    assert [*first.entries, *(entry for chunk in reading for entry in chunk.entries)] == held
    journal.close()


def test_a_missing_journal_is_named(tmp_path: Path) -> None:
    with pytest.raises(CommandError, match=r"cannot read .*a\.db: No such file or directory"):
        Recording(str(tmp_path / "a.db"))


def test_a_journal_that_is_damaged_is_said(tmp_path: Path) -> None:
    path = tmp_path / "a.db"
    Journal(path).close()
    with sqlite3.connect(path) as db:
        db.execute("DROP TABLE entries")
    with pytest.raises(CommandError, match=r"cannot read .*a\.db to its end: no such table"):
        entries(path)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.sampled_from(["x.jsonl", "x.csv", "x.jsonl.gz", "x.csv.gz"]), st.binary(max_size=300))
def test_no_bytes_crash_it(tmp_path: Path, name: str, content: bytes) -> None:
    for data in (content, gzip.compress(content) if name.endswith(".gz") else LINE + content):
        (tmp_path / name).write_bytes(data)
        with suppress(CommandError):
            entries(tmp_path / name)
