"""``driftbell export``: a journal, or a stretch of it, as a recording.

Knows the command line and the terminal. Must not know how lines or journals are made.
"""

from __future__ import annotations

import argparse
import json
import os
import sqlite3
import sys
from collections.abc import Iterable, Iterator
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

from monitor.background import Background
from monitor.commandline import DONE, WRONG, CommandError
from monitor.decode import judge_time
from monitor.entries import Message, Recorded, State
from monitor.excerpt import excerpt, having
from monitor.files import STDOUT, replacing
from monitor.history import recorded
from monitor.journal import JournalError, is_in_use, open_reader
from monitor.progress import Counter
from monitor.recording_lines import write_jsonl
from monitor.times import DAY, format_time

_LATEST = 2_932_896 * DAY  # the year 10000


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("journal", metavar="JOURNAL", help="the daemon's journal (.db)")
    parser.add_argument(
        "--since",
        metavar="T",
        type=_moment,
        help="from this arrival on: ISO 8601 with its offset, or an epoch number; the recording "
        "then begins with what was remembered of all that came before",
    )
    parser.add_argument(
        "--until", metavar="T", type=_moment, help="only what arrived before this moment"
    )
    parser.add_argument(
        "--characteristic", metavar="C", help="only messages on the topics that C reads"
    )
    parser.add_argument(
        "--to",
        metavar="FILE",
        default=STDOUT,
        help="a .jsonl or .jsonl.gz file; default: standard output",
    )
    parser.add_argument(
        "--json", action="store_true", help="say what was written as one JSON object on stdout"
    )


def main(args: argparse.Namespace) -> int:
    """Write every entry as a line; says how many on stderr."""
    if args.to != STDOUT and os.path.realpath(args.to) == os.path.realpath(args.journal):
        raise CommandError(f"{args.to} is the journal itself: write the recording elsewhere", WRONG)
    if args.json and args.to == STDOUT:
        raise CommandError("--json and the recording both want stdout: add --to FILE", WRONG)
    if None not in (args.since, args.until) and args.until <= args.since:
        raise CommandError("--until must be later than --since", WRONG)
    background = Background(rests=is_in_use(Path(args.journal)))
    progress = Counter("earlier entries folded")
    told = _Told()

    def folding() -> None:
        progress()
        background()

    try:
        with closing(open_reader(Path(args.journal))) as db, replacing(args.to) as file:
            found = background.through(recorded(db, args.since, args.until, folding))
            if args.characteristic is not None:
                found = excerpt(having(found, args.characteristic), args.characteristic)
            write_jsonl(file, progress.through(told.of(found), "entries"))
    except JournalError as error:
        raise CommandError(str(error)) from error
    except sqlite3.Error as error:
        raise CommandError(f"cannot read {args.journal} to its end: {error}") from error
    finally:
        progress.clear()
    if args.json:
        print(json.dumps(told.as_json(), indent=2))
    else:
        print(told.in_words(args.since), file=sys.stderr)
    return DONE


def _moment(text: str) -> int:
    moment = judge_time(text, _LATEST)
    if isinstance(moment, int):
        return moment
    raise argparse.ArgumentTypeError(
        f"{text!r} is no moment: write 2026-03-02T06:41:12Z (or with +01:00 for Z), or an epoch "
        "number"
    )


@dataclass(slots=True)
class _Told:
    """What was written; times in microseconds."""

    entries: int = 0
    messages: int = 0
    first: int | None = None
    last: int | None = None
    state: int | None = None

    def of(self, found: Iterable[State | Recorded]) -> Iterator[State | Recorded]:
        for entry in found:
            if isinstance(entry, State):
                self.state = entry.time
            else:
                self.entries += 1
                self.messages += isinstance(entry, Message)
                self.first = entry.time if self.first is None else self.first
                self.last = entry.time
            yield entry

    def as_json(self) -> dict[str, int | str | None]:
        times = {"first": self.first, "last": self.last, "state": self.state}
        return {
            "entries": self.entries,
            "messages": self.messages,
            **{name: None if at is None else format_time(at) for name, at in times.items()},
        }

    def in_words(self, since: int | None) -> str:
        parts = [f"{self.entries:,} entries"]
        if self.first is not None and self.last is not None:
            parts = [f"{parts[0]}, {format_time(self.first)} to {format_time(self.last)}"]
        if self.state is not None:
            if since is None or self.state >= since:
                parts.append("the journal reaches back no further")
            at = format_time(self.state)
            parts.append(f"before them, what was remembered of all that came until {at}")
        return "; ".join(parts)
