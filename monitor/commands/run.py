"""``driftbell run``: the daemon, with its logs and its exit status.

Knows how a process starts and ends. Must not know what the daemon does.
"""

from __future__ import annotations

import argparse
import os
import sqlite3
from pathlib import Path

import structlog

from monitor import logs
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_settings
from monitor.daemon import Daemon
from monitor.journal import JournalError
from monitor.plan import Settings

log = structlog.get_logger()


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="a YAML file, or a folder of them")


def main(args: argparse.Namespace) -> int:
    """Run until SIGTERM or SIGINT; 0 after a clean stop, 1 where it could not go on.

    SIGHUP reads the configuration again; one that is wrong changes nothing.
    """
    path = Path(args.config)
    try:
        settings = read_settings(path, os.environ)
    except ConfigurationError as error:
        raise CommandError(str(error), WRONG) from error
    logs.to_stderr()
    try:
        Daemon(settings, lambda: _again(path, settings)).run()
    except JournalError as error:
        raise CommandError(str(error), COULD_NOT) from error
    except sqlite3.Error as error:
        raise CommandError(
            f"cannot write the journal {settings.journal}: {error}; "
            "what it could not hold is still at the broker: make room on its disk and start again",
            COULD_NOT,
        ) from error
    return DONE


def _again(path: Path, before: Settings) -> Settings | None:
    try:
        settings = read_settings(path, os.environ)
    except ConfigurationError as error:
        log.error("the changed configuration is not used", problems=str(error))
        return None
    except Exception:
        # Ours, not the user's: no reason to stop watching.
        log.exception("the changed configuration is not used: it could not be worked out")
        return None
    for name in ("broker", "root", "points", "journal", "retention"):
        if getattr(settings, name) != getattr(before, name):
            log.error("the changed configuration is not used: restart for this", changed=name)
            return None
    log.info("the configuration was read again")
    return settings
