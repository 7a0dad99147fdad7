"""``driftbell-replay play``: its arguments, its progress and what it prints.

Knows the terminal. Must not know file formats or the engine.
"""

from __future__ import annotations

import argparse
import difflib
import os
import sys
from collections.abc import Mapping, Sequence
from contextlib import ExitStack
from pathlib import Path

import orjson

from monitor import files
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_plan
from monitor.plan import Plan
from monitor.progress import Progress
from monitor.times import parse_duration
from replay.play import Played, play
from replay.recordings import Chunk, Recording
from replay.summary import summary
from replay.tables import WORDS, Layout


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="the configuration: a file or a folder")
    parser.add_argument(
        "recordings",
        metavar="RECORDING",
        nargs="+",
        help="messages (.jsonl) or a table of readings (.csv), also .gz, or a journal (.db); "
        "several are one stream, in order of arrival",
    )
    parser.add_argument(
        "--alerts", metavar="FILE.jsonl", help="write the alert events; - is stdout"
    )
    parser.add_argument("--points", metavar="FILE.csv", help="write every point; - is stdout")
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout")
    parser.add_argument(
        "--column",
        metavar='WORD="Header"',
        action="append",
        default=[],
        help="which column of a table holds the characteristic, value, time, sequence or a stream "
        "key, where its header is not that word; repeatable",
    )
    parser.add_argument(
        "--interval",
        metavar="1s",
        default="1s",
        help="from row to row of a table without times, counted from 2000-01-01Z (default: 1s)",
    )


def main(args: argparse.Namespace) -> int:
    """Play the recordings; 1 where not a single line of them could be read."""
    _check_outputs(args)
    plan = _plan(args.config)
    layout = Layout(_keys(plan), _headers(args.column, plan), _only(plan))
    interval = _interval(args.interval)
    recordings = [Recording(path) for path in args.recordings]
    progress = Progress()
    seen: dict[str, None] = {}

    def tell(chunk: Chunk) -> None:
        seen[chunk.recording.path] = None
        progress(lambda: _how_far(chunk, len(seen), len(recordings)))

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


def _keys(plan: Plan) -> tuple[str, ...]:
    keys: dict[str, None] = {}
    for characteristic in plan.characteristics:
        keys.update((key, None) for _, key in characteristic.source.captures)
        keys.update((key, None) for key, _ in characteristic.source.stream)
    return tuple(keys)


def _only(plan: Plan) -> str | None:
    return plan.characteristics[0].name if len(plan.characteristics) == 1 else None


def _headers(pairs: Sequence[str], plan: Plan) -> Mapping[str, str]:
    words = (*WORDS, *_keys(plan))
    headers: dict[str, str] = {}
    for pair in pairs:
        word, equals, header = (part.strip() for part in pair.partition("="))
        if not equals or not word or not header:
            raise CommandError(f'--column {pair}: write it as value="Net weight"', WRONG)
        if word not in words:
            near = difflib.get_close_matches(word, words, 1)
            hint = f"did you mean {near[0]}?" if near else f"use one of {', '.join(words)}"
            raise CommandError(f"--column {pair}: there is no {word!r} to fill; {hint}", WRONG)
        if word in headers:
            raise CommandError(f"--column {word} is given twice", WRONG)
        headers[word] = header
    return headers


def _interval(text: str) -> int:
    try:
        interval = parse_duration(text)
    except ValueError as error:
        raise CommandError(f"--interval: {error}", WRONG) from None
    if interval <= 0:
        raise CommandError("--interval: rows need some time between them, as in 1s", WRONG)
    return interval


def _complain(played: Played) -> None:
    for line in played.unreadable_at:
        print(line, file=sys.stderr)
    more = played.unreadable - len(played.unreadable_at)
    if more:
        print(f"… and {more:,} more lines that could not be read", file=sys.stderr)
    for note in played.notes:
        print(note, file=sys.stderr)


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
            "seconds": round(played.seconds, 6),
        },
        option=orjson.OPT_APPEND_NEWLINE,
    )


def _how_far(chunk: Chunk, begun: int, recordings: int) -> str:
    fraction = chunk.recording.fraction()
    which = f" ({begun} of {recordings})" if recordings > 1 else ""
    part = f" {fraction:.0%}" if fraction else ""
    return f"{chunk.recording.path}{which}:{part} line {chunk.first + len(chunk.entries) - 1:,}"
