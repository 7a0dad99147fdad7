"""``driftbell-replay play``: its arguments, its progress and what it prints.

Knows the terminal. Must not know file formats or the engine.
"""

from __future__ import annotations

import argparse
import os
import sys
from contextlib import ExitStack
from pathlib import Path
from typing import Any

import orjson

from monitor import files, times
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_plan
from monitor.plan import Plan
from monitor.progress import Progress
from replay.commands import inputs
from replay.play import Played, play
from replay.recordings import Recording
from replay.summary import summary


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    inputs.configure(parser)
    parser.add_argument(
        "--alerts", metavar="FILE.jsonl", help="write the alert events; - is stdout"
    )
    parser.add_argument("--points", metavar="FILE.csv", help="write every point; - is stdout")
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout")


def main(args: argparse.Namespace) -> int:
    """Play the recordings; 1 where not a single line of them could be read."""
    _check_outputs(args)
    plan = _plan(args.config)
    layout, interval = inputs.layout(plan, args.column), inputs.interval(args.interval)
    recordings = [Recording(path) for path in args.recordings]
    progress = Progress()
    tell = inputs.teller(progress, len(recordings))
    with ExitStack() as stack:
        alerts, points = (
            None if path is None else stack.enter_context(files.replacing(path))
            for path in (args.alerts, args.points)
        )
        try:
            played = play(
                plan, recordings, layout, interval, alerts=alerts, points=points, progress=tell
            )
        finally:
            progress.clear()
    _complain(played)
    noun = "rows" if all(recording.rows for recording in recordings) else "messages"
    if args.json:
        sys.stdout.buffer.write(_json(played))
    elif files.STDOUT in (args.alerts, args.points):
        sys.stderr.write(summary(played, noun))
    else:
        sys.stdout.write(summary(played, noun))
    return COULD_NOT if played.unreadable and not played.entries else DONE


def _check_outputs(args: argparse.Namespace) -> None:
    written = [path for path in (args.alerts, args.points) if path is not None]
    if written.count(files.STDOUT) + args.json > 1:
        raise CommandError("only one of --alerts -, --points - and --json can have stdout", WRONG)
    named = [os.path.realpath(path) for path in written if path != files.STDOUT]
    if len(set(named)) < len(named):
        raise CommandError("--alerts and --points name one file: give them one each", WRONG)
    for path in args.recordings:
        if os.path.realpath(path) in named:
            raise CommandError(f"{path} is a recording: write the results elsewhere", WRONG)


def _plan(path: str) -> Plan:
    try:
        return read_plan(Path(path), os.environ)
    except ConfigurationError as error:
        raise CommandError(str(error), WRONG) from None


def _complain(played: Played) -> None:
    for line in played.unreadable_at:
        print(line, file=sys.stderr)
    more = played.unreadable - len(played.unreadable_at)
    if more:
        print(f"… and {more:,} more lines that could not be read", file=sys.stderr)
    for note in played.notes:
        print(note, file=sys.stderr)


def _judged(played: Played) -> dict[str, Any]:
    """By characteristic: how many subgroups there were, how many of them were judged, why streams
    are not, and from when on by what they learned."""
    found: dict[str, dict[str, Any]] = {
        name: {"subgroups": 0, "judged": 0, "why_not": {}, "adopted": {}}
        for name in sorted({each.characteristic for each in played.streams} | set(played.unread))
    }
    for each in played.streams:
        own = found[each.characteristic]
        own["subgroups"] += each.subgroups
        own["judged"] += each.judged
        if each.why is not None:
            own["why_not"][each.stream] = each.why
        if each.adopted is not None:
            own["adopted"][each.stream] = times.format_time(each.adopted)
    return found


def _json(played: Played) -> bytes:
    counts = played.counts
    return orjson.dumps(
        {
            "messages": counts.messages,
            "readings": counts.readings,
            "set_aside": counts.set_aside,
            "unreadable": played.unreadable,
            "subgroups": counts.subgroups,
            "abandoned": counts.abandoned,
            "missing": counts.missing,
            "signals": counts.signals,
            "alerts": counts.alerts,
            "judged": _judged(played),
            "seconds": round(played.seconds, 6),
        },
        option=orjson.OPT_APPEND_NEWLINE,
    )
