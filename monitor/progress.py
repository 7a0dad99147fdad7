"""How many of something a command has done, on a terminal, where it takes long.

Knows the terminal. Must not know what is done.
"""

from __future__ import annotations

import sys
from collections.abc import Iterable, Iterator
from time import monotonic
from typing import TypeVar

T = TypeVar("T")

_QUIET = 1.0  # seconds; who waits longer wants to see that it goes on
_EVERY = 0.25
_LOOK_AFTER = 1_024  # between two looks at the clock


class Counter:
    """Counts calls, and shows them as so many of ``what`` on stderr where that is a terminal."""

    def __init__(self, what: str) -> None:
        self._what = what
        self._count = 0
        self._next = monotonic() + _QUIET if sys.stderr.isatty() else float("inf")
        self._shown = False

    def __call__(self) -> None:
        """One more is done."""
        self._count += 1
        if self._count % _LOOK_AFTER == 0:
            self._show()

    def through(self, items: Iterable[T], what: str) -> Iterator[T]:
        """The items, counted from now on, as so many of ``what``."""
        for item in items:
            if self._what != what:
                self._what, self._count = what, 0
            yield item
            self()

    def clear(self) -> None:
        """Take the line away."""
        if self._shown:
            self._shown = False
            print("\r\x1b[K", end="", file=sys.stderr, flush=True)

    def _show(self) -> None:
        now = monotonic()
        if now >= self._next:
            self._next, self._shown = now + _EVERY, True
            text = f"\r\x1b[K{self._count:,} {self._what}"
            print(text, end="", file=sys.stderr, flush=True)
