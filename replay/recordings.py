"""Recordings: what kind of file one is, opening it, and its entries.

Knows file names and compression. Must not know what lines and rows hold, plans or the engine.
"""

from __future__ import annotations

import gzip
import io
import os
import zlib
from collections.abc import Callable, Iterator
from typing import cast

from monitor.commandline import WRONG, CommandError
from monitor.entries import Entry
from replay.lines import read_lines
from replay.tables import Layout, read_table

OnUnreadable = Callable[[int, str], None]
"""Told the number of a line that is no entry, and what is wrong with it."""

_GZIP = b"\x1f\x8b"
_UTF8_MARK = b"\xef\xbb\xbf"
_UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")
_BUFFER = 1 << 18


class Recording:
    """One file. Raises CommandError, at once, where it cannot be read as what its name says."""

    def __init__(self, path: str) -> None:
        self.path = path
        name = path.lower()
        self._packed = name.endswith(".gz")
        kind = os.path.splitext(name.removesuffix(".gz"))[1]
        if kind == ".db":
            raise CommandError(
                f"{path}: playing a journal is not built yet; driftbell export writes it as .jsonl",
                WRONG,
            )
        if kind not in (".jsonl", ".csv"):
            raise CommandError(
                f"{path}: a recording's name ends in .jsonl or .csv, or these with .gz"
            )
        self._table = kind == ".csv"
        self._file: io.BufferedReader | None = None
        try:
            self._size = os.stat(path).st_size
            if os.path.isfile(path):  # a pipe gives its bytes only once
                with open(path, "rb") as file:
                    self._check(file.read(2))
        except OSError as error:
            raise CommandError(f"cannot read {path}: {error.strerror}") from error

    def fraction(self) -> float:
        """The part of the file that has been read; 0 before, and where that cannot be known."""
        if self._file is None or not self._size:
            return 0.0
        return self._file.tell() / self._size

    def entries(
        self, layout: Layout, clock: Iterator[int], unreadable: OnUnreadable
    ) -> Iterator[tuple[int, Entry]]:
        """Line numbers from 1, and entries; ``layout`` and ``clock`` as in ``read_table``."""
        try:
            raw = self._file = io.BufferedReader(io.FileIO(self.path), _BUFFER)
            with raw, self._unpacked(raw) as file:
                if file.peek(len(_UTF8_MARK)).startswith(_UTF8_MARK):
                    file.read(len(_UTF8_MARK))
                if self._table:
                    # A cell in an older encoding stays readable, and what differed stays different.
                    text = io.TextIOWrapper(file, "utf-8", "backslashreplace", newline="")
                    yield from read_table(self.path, text, layout, clock, unreadable)
                else:
                    yield from read_lines(self.path, file, unreadable)
        except EOFError as error:
            raise CommandError(f"{self.path} ends in the middle of its compressed data") from error
        except (OSError, zlib.error) as error:
            raise CommandError(f"cannot read {self.path} to its end: {error}") from error
        finally:
            self._file = None

    def _check(self, start: bytes) -> None:
        if self._packed and start != _GZIP:
            raise CommandError(
                f"{self.path} is not gzip data: without .gz in its name it may be read"
            )
        if start in _UTF16_MARKS:
            raise CommandError(f"{self.path} is UTF-16 text: save it as UTF-8")

    def _unpacked(self, file: io.BufferedReader) -> io.BufferedReader:
        if not self._packed:
            return file
        return io.BufferedReader(cast(io.RawIOBase, gzip.GzipFile(fileobj=file)), _BUFFER)
