"""Logs to stderr: readable on a terminal, one JSON object a line elsewhere.

Knows structlog. Must not know what is logged.
"""

from __future__ import annotations

import contextlib
import os
import sys

import structlog


class _Stderr:
    """Writes a line, or not: a full disk or a reader who has gone must not end the watch."""

    def msg(self, line: str) -> None:
        with contextlib.suppress(OSError):
            os.write(sys.stderr.fileno(), f"{line}\n".encode(errors="backslashreplace"))

    info = warning = error = msg


def to_stderr() -> None:
    """Set up logging for a whole process; call it once, first."""
    terminal = sys.stderr.isatty()
    structlog.configure(
        processors=[
            structlog.processors.add_log_level,
            structlog.processors.TimeStamper(fmt="iso", utc=True),
            structlog.dev.ConsoleRenderer() if terminal else structlog.processors.JSONRenderer(),
        ],
        logger_factory=_Stderr,
        cache_logger_on_first_use=True,
    )
