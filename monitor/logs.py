"""Logs to stderr: readable on a terminal, one JSON object a line elsewhere.

Knows structlog. Must not know what is logged.
"""

from __future__ import annotations

import sys

import structlog


def to_stderr() -> None:
    """Set up logging for a whole process; call it once, first."""
    terminal = sys.stderr.isatty()
    structlog.configure(
        processors=[
            structlog.processors.add_log_level,
            structlog.processors.TimeStamper(fmt="iso", utc=True),
            structlog.processors.format_exc_info,
            structlog.dev.ConsoleRenderer() if terminal else structlog.processors.JSONRenderer(),
        ],
        logger_factory=structlog.PrintLoggerFactory(sys.stderr),
        cache_logger_on_first_use=True,
    )
