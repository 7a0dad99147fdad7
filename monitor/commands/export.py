"""``driftbell export``: a journal as a recording.

Knows the command line and the terminal. Must not know how lines or journals are made.
"""

from __future__ import annotations

import argparse
import os
import sqlite3
import sys
import time
from collections.abc import Iterator
from pathlib import Path

from monitor.commandline import DONE, WRONG, CommandError
from monitor.entries import Recorded
from monitor.files import STDOUT, replacing
from monitor.journal import JournalError, open_reader, read_entries
from monitor.recording_lines import write_jsonl

_QUIET = 1.0  # seconds; who waits longer wants to see that it goes on


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("journal", metavar="JOURNAL", help="the daemon's journal (.db)")
    parser.add_argument(
        "--to",
        metavar="FILE",
        default=STDOUT,
        help="a .jsonl or .jsonl.gz file; default: standard output",
    )


def main(args: argparse.Namespace) -> int:
    """Write every entry as a line; says how many on stderr."""
    if args.to != STDOUT and os.path.realpath(args.to) == os.path.realpath(args.journal):
        raise CommandError(f"{args.to} is the journal itself: write the recording elsewhere", WRONG)
    try:
        entries = read_entries(open_reader(Path(args.journal)))
        with replacing(args.to) as file:
            count = write_jsonl(file, _shown(entries) if sys.stderr.isatty() else entries)
    except JournalError as error:
        raise CommandError(str(error)) from error
    except sqlite3.Error as error:
        raise CommandError(f"cannot read {args.journal} to its end: {error}") from error
    print(f"{count} entries", file=sys.stderr)
    return DONE


def _shown(entries: Iterator[Recorded]) -> Iterator[Recorded]:
    """The entries, with their number on the terminal where it takes long."""
    following = time.monotonic() + _QUIET
    for number, entry in enumerate(entries, 1):
        yield entry
        if number % 1024 == 0 and time.monotonic() >= following:
            following = time.monotonic() + 0.25
            print(f"\r\x1b[K{number:,} entries", end="", file=sys.stderr, flush=True)
    print("\r\x1b[K", end="", file=sys.stderr)
