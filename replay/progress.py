"""One line on a terminal that says how far a command is.

Knows the terminal. Must not know what is being done.
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from time import monotonic

_QUIET = 1.0  # seconds; who waits longer wants to see that it goes on
_EVERY = 0.25


class Progress:
    """Shows a line on stderr where that is a terminal; ``clear`` takes it away."""

    def __init__(self) -> None:
        self._next = monotonic() + _QUIET if sys.stderr.isatty() else float("inf")
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
