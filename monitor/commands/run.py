"""``driftbell run``: the daemon, with its logs and its exit status.

Knows how a process starts and ends. Must not know what the daemon does.
"""

from __future__ import annotations

import argparse
import os
import sqlite3
from pathlib import Path

from monitor import logs
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.daemon import Daemon
from monitor.journal import JournalError
from monitor.problems import ConfigurationError
from monitor.resolve import read_settings


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="a YAML file, or a folder of them")


def main(args: argparse.Namespace) -> int:
    """Run until SIGTERM or SIGINT; 0 after a clean stop, 1 where it could not go on."""
    try:
        settings = read_settings(Path(args.config), os.environ)
    except ConfigurationError as error:
        raise CommandError(str(error), WRONG) from error
    logs.to_stderr()
    try:
        Daemon(settings).run()
    except JournalError as error:
        raise CommandError(str(error), COULD_NOT) from error
    except sqlite3.Error as error:
        raise CommandError(
            f"cannot write the journal {settings.journal}: {error}; "
            "what it could not hold is still at the broker: make room on its disk and start again",
            COULD_NOT,
        ) from error
    return DONE
