"""Disk space held back: a full disk refuses even to delete, unless something can be let go of.

Knows one file and how much space is free. Must not know the journal.
"""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

SIZE = 8 << 20


class Ballast:
    """A file of ``SIZE`` bytes beside another."""

    def __init__(self, beside: Path) -> None:
        self._path = beside.with_name(beside.name + ".ballast")

    def take(self) -> None:
        """Hold the space back, where there is enough of it to spare."""
        with contextlib.suppress(OSError):
            if self._path.exists() and self._path.stat().st_size == SIZE:
                return
            if self._free() < 4 * SIZE:
                return
            with self._path.open("wb") as file:
                os.posix_fallocate(file.fileno(), 0, SIZE)

    def let_go(self) -> None:
        """Give the space back."""
        with contextlib.suppress(OSError):
            self._path.unlink()

    def has_room(self) -> bool:
        """Whether there is room to go on; a small disk never has room for ballast."""
        try:
            found = os.statvfs(self._path.parent)
        except OSError:
            return False
        return found.f_bavail * found.f_frsize > min(SIZE, found.f_blocks * found.f_frsize // 4)

    def _free(self) -> int:
        found = os.statvfs(self._path.parent)
        return found.f_bavail * found.f_frsize
