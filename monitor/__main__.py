"""The ``driftbell`` command: only the table of its subcommands."""

from __future__ import annotations

import sys
from collections.abc import Sequence

from monitor import commandline

COMMANDS = {
    "run": ("monitor.commands.run", "the daemon: watch the line that CONFIG describes"),
    "check": ("monitor.commands.check", "validate CONFIG and say what it will do"),
    "demo": ("monitor.commands.demo", "a simulated jar line with its own broker, watched live"),
    "export": ("monitor.commands.export", "write a journal as a recording"),
    "explain": ("monitor.commands.explain", "why one alert rang: its points and arithmetic"),
    "describe": ("monitor.commands.describe", "JSON Schema of all messages, or AsyncAPI"),
}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; returns the exit status (0 done, 1 could not, 2 wrong input)."""
    return commandline.run(
        "driftbell",
        "Watches in-line gauges over MQTT and rings when, and only when, something has changed.",
        COMMANDS,
        arguments,
    )


if __name__ == "__main__":
    sys.exit(main())
