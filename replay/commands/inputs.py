"""The arguments of every command that reads recordings: which, and how their tables are laid out.

Knows the command line. Must not know what a command does with what it reads.
"""

from __future__ import annotations

import argparse
import difflib
from collections.abc import Callable, Mapping, Sequence

from monitor.commandline import WRONG, CommandError
from monitor.plan import CharacteristicPlan, Plan
from monitor.progress import Progress
from monitor.times import parse_duration
from replay.recordings import Chunk
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


def layout(plan: Plan, columns: Sequence[str]) -> Layout:
    """How tables are read; ``columns`` as ``--column`` has them. Raises CommandError."""
    only = plan.characteristics[0].name if len(plan.characteristics) == 1 else None
    return Layout(_keys(plan), _headers(columns, plan), only)


def chosen(plan: Plan, name: str | None) -> CharacteristicPlan:
    """The characteristic of that ``--characteristic``, or the only one. Raises CommandError."""
    names = [each.name for each in plan.characteristics]
    if name is None and len(names) > 1:
        raise CommandError(
            f"the configuration has {', '.join(names)}: say which with --characteristic", WRONG
        )
    if name is not None and name not in names:
        raise CommandError(
            f"--characteristic {name}: the configuration has {', '.join(names)}", WRONG
        )
    return plan.characteristics[0 if name is None else names.index(name)]


def interval(text: str) -> int:
    """``--interval`` in microseconds. Raises CommandError."""
    try:
        between = parse_duration(text)
    except ValueError as error:
        raise CommandError(f"--interval: {error}", WRONG) from None
    if between <= 0:
        raise CommandError("--interval: rows need some time between them, as in 1s", WRONG)
    return between


def teller(progress: Progress, recordings: int) -> Callable[[Chunk], None]:
    """Shows on ``progress`` how far the reading of so many recordings is."""
    seen: dict[str, None] = {}

    def tell(chunk: Chunk) -> None:
        seen[chunk.recording.path] = None
        progress(lambda: _how_far(chunk, len(seen), recordings))

    return tell


def _keys(plan: Plan) -> tuple[str, ...]:
    keys: dict[str, None] = {}
    for characteristic in plan.characteristics:
        keys.update((key, None) for _, key in characteristic.source.captures)
        keys.update((key, None) for key, _ in characteristic.source.stream)
    return tuple(keys)


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


def _how_far(chunk: Chunk, begun: int, recordings: int) -> str:
    fraction = chunk.recording.fraction()
    which = f" ({begun} of {recordings})" if recordings > 1 else ""
    part = f" {fraction:.0%}" if fraction else ""
    return f"{chunk.recording.path}{which}:{part} line {chunk.first + len(chunk.entries) - 1:,}"
