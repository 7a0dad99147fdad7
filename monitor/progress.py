"""One line on a terminal that says how far a command is.

Knows the terminal. Must not know what is being done.
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable, Iterator
from time import monotonic
from typing import TypeVar

T = TypeVar("T")

_QUIET = 1.0  # seconds; who waits longer wants to see that it goes on
_EVERY = 0.25
_LOOK_AFTER = 1_024  # between two looks at the clock


class Progress:
    """Shows a line on stderr where that is a terminal; ``clear`` takes it away.

    ``at_once``: from the first call on, not only where it takes long.
    """

    def __init__(self, *, at_once: bool = False) -> None:
        first = monotonic() + (0.0 if at_once else _QUIET)
        self._next = first if sys.stderr.isatty() else float("inf")
        self._shown = False

    def __call__(self, text: Callable[[], str]) -> None:
        """Show ``text()`` in place of the last, once it is due."""
        now = monotonic()
        if now < self._next:
            return
        self._next = now + _EVERY
        self._shown = True
        print(f"\r\x1b[K{text()}", end="", file=sys.stderr, flush=True)

    def clear(self) -> None:
        """Take the line away."""
        if self._shown:
            self._shown = False
            print("\r\x1b[K", end="", file=sys.stderr, flush=True)


class Counter:
    """Counts calls, and shows them as so many of ``what``."""

    def __init__(self, what: str) -> None:
        self._what = what
        self._count = 0
        self._progress = Progress()
        self.clear = self._progress.clear

    def __call__(self) -> None:
        """One more is done."""
        self._count += 1
        if self._count % _LOOK_AFTER == 0:
            self._progress(lambda: f"{self._count:,} {self._what}")

    def through(self, items: Iterable[T], what: str) -> Iterator[T]:
        """The items, counted from now on, as so many of ``what``."""
        for item in items:
            if self._what != what:
                self._what, self._count = what, 0
            yield item
            self()
