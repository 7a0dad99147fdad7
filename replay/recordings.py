"""Recordings: what kind of file one is, opening it, and its entries.

Knows file names and compression. Must not know what lines and rows hold, plans or the engine.
"""

from __future__ import annotations

import gzip
import io
import os
import sqlite3
import zlib
from collections.abc import Callable, Iterable, Iterator
from contextlib import closing, contextmanager
from dataclasses import dataclass
from itertools import repeat
from pathlib import Path
from typing import cast

from monitor.commandline import CommandError
from monitor.entries import Entry, State
from monitor.history import recorded
from monitor.journal import JournalError, open_reader
from replay.lines import read_lines
from replay.tables import Layout, Table

OnUnreadable = Callable[["Recording", int, str], None]
"""Told the recording, the number of a line that is no entry, and what is wrong with it."""

_GZIP = b"\x1f\x8b"
_UTF8_MARK = b"\xef\xbb\xbf"
_UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")
_BUFFER = 1 << 16
_CHUNK = 512  # entries


@dataclass(slots=True)
class Chunk:
    """Some lines of a recording: the number of the first, from 1, and what each of them holds,
    None where no entry ends."""

    recording: Recording
    first: int
    entries: list[Entry | State | None]


@dataclass(frozen=True, slots=True)
class Opened:
    """A recording's chunks, in its own order; ``timed`` is false where it has no times at all."""

    chunks: Iterator[Chunk]
    timed: bool = True


class Recording:
    """One file. Raises CommandError, at once, where it cannot be read as what its name says."""

    def __init__(self, path: str) -> None:
        self.path = path
        name = path.lower()
        self._packed = name.endswith(".gz")
        self._kind = os.path.splitext(name.removesuffix(".gz"))[1]
        if self._kind not in (".jsonl", ".csv", ".db") or name.endswith(".db.gz"):
            raise CommandError(
                f"{path}: a recording's name ends in .jsonl or .csv, or these with .gz, or in .db"
            )
        self._file: io.BufferedReader | None = None
        with self._said_in_words():
            self._size = os.stat(path).st_size
            if self._kind == ".db":
                open_reader(Path(path)).close()
            elif os.path.isfile(path):  # a pipe gives its bytes only once
                with open(path, "rb") as file:
                    self._check(file.read(2))

    @property
    def rows(self) -> bool:
        """Whether it is a table of readings, not messages."""
        return self._kind == ".csv"

    def fraction(self) -> float:
        """The part of the file that has been read; 0 before, and where that cannot be known."""
        if self._file is None or not self._size:
            return 0.0
        return self._file.tell() / self._size

    def open(self, layout: Layout, clock: Iterator[int], unreadable: OnUnreadable) -> Opened:
        """Begin to read; ``layout`` and ``clock`` as in ``Table``."""

        def say(number: int, wrong: str) -> None:
            unreadable(self, number, wrong)

        with self._said_in_words():
            if self._kind == ".db":
                journal = open_reader(Path(self.path))
                held = enumerate(recorded(journal), 1)
                return Opened(self._chunks(_gathered(held), journal))
            file = self._unpacked()
            if self._kind == ".jsonl":
                return Opened(self._chunks(read_lines(self.path, file, say), file))
            # A cell in an older encoding stays readable, and what differed stays different.
            text = io.TextIOWrapper(file, "utf-8", "backslashreplace", newline="")
            table = Table(self.path, text, layout, say)
            return Opened(self._chunks(_gathered(table.readings(clock)), text), table.timed)

    def _chunks(
        self,
        chunks: Iterator[tuple[int, list[Entry | State | None]]],
        source: sqlite3.Connection | io.IOBase,
    ) -> Iterator[Chunk]:
        with self._said_in_words(" to its end"), closing(source):
            for first, entries in chunks:
                yield Chunk(self, first, entries)
        if self._file is not None:
            self._file.close()
            self._file = None

    def _unpacked(self) -> io.BufferedReader:
        file = self._file = io.BufferedReader(io.FileIO(self.path), _BUFFER)
        if self._packed:
            file = io.BufferedReader(cast(io.RawIOBase, gzip.GzipFile(fileobj=file)), _BUFFER)
        if file.peek(len(_UTF8_MARK)).startswith(_UTF8_MARK):
            file.read(len(_UTF8_MARK))
        return file

    def _check(self, start: bytes) -> None:
        if self._packed and start != _GZIP:
            raise CommandError(
                f"{self.path} is not gzip data: without .gz in its name it may be read"
            )
        if start in _UTF16_MARKS:
            raise CommandError(f"{self.path} is UTF-16 text: save it as UTF-8")

    @contextmanager
    def _said_in_words(self, how_far: str = "") -> Iterator[None]:
        try:
            yield
        except JournalError as error:
            raise CommandError(str(error)) from error
        except EOFError as error:
            raise CommandError(f"{self.path} ends in the middle of its compressed data") from error
        except (OSError, zlib.error, sqlite3.Error, ValueError) as error:
            why = getattr(error, "strerror", None) or error
            raise CommandError(f"cannot read {self.path}{how_far}: {why}") from error


def _gathered(
    numbered: Iterable[tuple[int, Entry | State]],
) -> Iterator[tuple[int, list[Entry | State | None]]]:
    first = 1
    entries: list[Entry | State | None] = []
    for number, entry in numbered:
        entries.extend(repeat(None, number - first - len(entries)))
        entries.append(entry)
        if len(entries) >= _CHUNK:
            yield first, entries
            first, entries = number + 1, []
    if entries:
        yield first, entries
