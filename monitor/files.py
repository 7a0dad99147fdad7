"""Files that commands write for people: whole or not at all, ``-`` for stdout, ``.gz`` compressed.

Knows paths and bytes. Must not know what is written.
"""

from __future__ import annotations

import gzip
import io
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import IO, cast

from monitor.commandline import CommandError

STDOUT = "-"
_BUFFER = 1 << 18


@contextmanager
def replacing(path: str) -> Iterator[IO[bytes]]:
    """A binary file to write ``path`` through.

    It appears under its name when the block ends well, so a crash leaves no half file that looks
    whole. Raises CommandError where it cannot be written.
    """
    if path == STDOUT:
        yield sys.stdout.buffer
        sys.stdout.buffer.flush()
        return
    target = Path(os.path.realpath(path))
    if target.exists() and not target.is_file():
        # A device or a pipe: nothing may be renamed over it.
        with _open(target, path) as file:
            yield file
        return
    part = target.with_name(f".{target.name}.{os.getpid()}.part")
    try:
        with _open(part, path) as file:
            if target.suffix == ".gz":
                # Neither name nor moment in the header: equal content gives equal bytes.
                with gzip.GzipFile("", "wb", 6, file, mtime=0) as compressed:
                    yield cast(IO[bytes], compressed)
            else:
                yield file
        try:
            part.replace(target)
        except OSError as error:
            raise _cannot_write(path, error) from error
    finally:
        part.unlink(missing_ok=True)


class _Raw(io.FileIO):
    """A file that names itself when the disk is full."""

    def __init__(self, path: Path, said: str) -> None:
        super().__init__(path, "wb")
        self._said = said

    def write(self, data: object, /) -> int:
        try:
            return super().write(data)  # type: ignore[arg-type]
        except OSError as error:
            raise _cannot_write(self._said, error) from error


def _open(path: Path, said: str) -> IO[bytes]:
    try:
        return io.BufferedWriter(_Raw(path, said), _BUFFER)
    except OSError as error:
        raise _cannot_write(said, error) from error


def _cannot_write(path: str, error: OSError) -> CommandError:
    return CommandError(f"cannot write {path}: {error.strerror or error}")
