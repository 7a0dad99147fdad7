"""Files written whole or not at all."""

from __future__ import annotations

import gzip
import os
import stat
from pathlib import Path

import pytest

from monitor.commandline import CommandError
from monitor.files import replacing


def test_the_file_appears_when_the_block_ends(tmp_path: Path) -> None:
    path = tmp_path / "points.csv"
    path.write_text("old")
    with replacing(str(path)) as file:
        file.write(b"new")
        assert path.read_text() == "old"
    assert path.read_text() == "new"
    assert os.listdir(tmp_path) == ["points.csv"]


def test_a_block_that_fails_leaves_what_was_there(tmp_path: Path) -> None:
    path = tmp_path / "points.csv"
    path.write_text("old")

    def fail() -> None:
        with replacing(str(path)) as file:
            file.write(b"half")
            raise RuntimeError

    with pytest.raises(RuntimeError):
        fail()
    assert path.read_text() == "old"
    assert os.listdir(tmp_path) == ["points.csv"]


def test_gz_is_compressed_and_the_same_each_time(tmp_path: Path) -> None:
    written = []
    for name in ("a.jsonl.gz", "b.jsonl.gz"):
        with replacing(str(tmp_path / name)) as file:
            file.write(b"line\n")
        written.append((tmp_path / name).read_bytes())
    assert gzip.decompress(written[0]) == b"line\n"
    assert written[0] == written[1]


def test_a_link_keeps_pointing_where_it_did(tmp_path: Path) -> None:
    (tmp_path / "real").write_text("old")
    (tmp_path / "link").symlink_to("real")
    with replacing(str(tmp_path / "link")) as file:
        file.write(b"new")
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "real").read_text() == "new"


def test_a_pipe_is_written_not_replaced(tmp_path: Path) -> None:
    path = tmp_path / "pipe"
    os.mkfifo(path)
    reader = os.open(path, os.O_RDONLY | os.O_NONBLOCK)
    with replacing(str(path)) as file:
        file.write(b"through")
    assert os.read(reader, 100) == b"through"
    os.close(reader)
    assert stat.S_ISFIFO(path.stat().st_mode)


def test_a_folder_that_is_missing_is_named(tmp_path: Path) -> None:
    path = str(tmp_path / "missing" / "a.csv")
    with pytest.raises(CommandError, match=r"missing/a\.csv: No such file"), replacing(path):
        pass


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no /dev/full here")
def test_a_full_disk_is_said_with_the_name_of_the_file() -> None:
    def fill() -> None:
        with replacing("/dev/full") as file:
            file.write(b"x" * 1_000_000)

    with pytest.raises(CommandError, match="cannot write /dev/full: No space left"):
        fill()
