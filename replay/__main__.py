"""The ``driftbell-replay`` command: only the table of its subcommands."""

from __future__ import annotations

import sys
from collections.abc import Sequence

from monitor import commandline

COMMANDS = {
    "play": ("replay.commands.play", "run the engine over recordings"),
    "send": ("replay.commands.send", "publish a recording, with its own timing"),
    "baseline": ("replay.commands.baseline", "estimate a baseline: may it be trusted?"),
    "design": ("replay.commands.design", "run lengths of a detector, or the one for a run length"),
    "tune": ("replay.commands.tune", "compare settings on recordings of the line's own"),
    "scene": ("replay.commands.scene", "write a story of the demo line as a recording"),
}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; returns the exit status (0 done, 1 could not, 2 wrong input)."""
    return commandline.run(
        "driftbell-replay",
        "Plays recorded streams through the engine that watches the line.",
        COMMANDS,
        arguments,
    )


if __name__ == "__main__":
    sys.exit(main())
