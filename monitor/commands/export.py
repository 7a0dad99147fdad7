"""``driftbell export``: a journal as a recording.

Knows the command line. Must not know how lines or journals are made.
"""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from monitor.commandline import DONE, CommandError
from monitor.files import STDOUT, replacing
from monitor.journal import JournalError, open_reader, read_entries
from monitor.recording_lines import write_jsonl


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
    try:
        db = open_reader(Path(args.journal))
    except JournalError as error:
        raise CommandError(str(error)) from error
    with replacing(args.to) as file:
        count = write_jsonl(file, read_entries(db))
    print(f"{count} entries", file=sys.stderr)
    return DONE
