"""``driftbell-replay tune``: its arguments, its progress and where the answer goes.

Knows the terminal. Must not know how settings are judged or how the answer is worded.
"""

from __future__ import annotations

import argparse
import math
import os
import shutil
import sys
from collections import Counter
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import cast

import orjson

from monitor import files, stream_names
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.config import load_measured
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_plan
from monitor.configuration.sections.characteristic import Characteristic
from monitor.plan import CharacteristicPlan, Intent, Plan
from monitor.progress import Progress
from monitor.times import SECOND, format_time, parse_duration
from replay import set_aside_words
from replay.commands import inputs
from replay.readings import Gathered, Readings, gather, sha256
from replay.recordings import Recording
from replay.tuning import labels
from replay.tuning.as_json import as_json
from replay.tuning.candidates import Request
from replay.tuning.declared import declared, intents
from replay.tuning.report import page, require_plotly
from replay.tuning.result import Kind, Source
from replay.tuning.shares import role_of
from replay.tuning.study import study
from replay.tuning.words import commented, lines

_UNBROKEN = 160
"""Columns where there is no terminal, so that a row of a table is a line."""

_LEAST = 60

_KINDS: tuple[Kind, ...] = ("cusum", "ewma", "shewhart")
_EXAMPLES = (
    """\
drifts are in the gauge's unit, constants in standard errors of the charted statistic

  driftbell-replay tune CONFIG week.jsonl.gz --catch 1.5 --false-alarm-every 14d
  driftbell-replay tune CONFIG week.db --characteristic net-weight --catch 1,1.5 --ignore 0,0.3 \\
      --size 1,5,10 --cusum 0.5,5 --shewhart 3 --to best.yaml --html best.html

"""
    + labels.HELP
)


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EXAMPLES
    inputs.configure(parser)
    parser.add_argument("--characteristic", metavar="NAME", help="which, where there are several")
    asked = parser.add_argument_group("what people can judge")
    asked.add_argument(
        "--catch", metavar="D,D,...", help="drifts worth catching; settings are ranked by the first"
    )
    asked.add_argument(
        "--ignore", metavar="E,E,...", help="drifts to leave alone (default: as configured, else 0)"
    )
    asked.add_argument(
        "--false-alarm-every",
        metavar="14d",
        help="running time between false alarms, all streams and detectors together (default: the "
        "promise)",
    )
    asked.add_argument(
        "--catch-ratio",
        metavar="R",
        help="watch the spread as well, for one R times as large (default: as configured; where "
        "none is, 1.5 is put in, and not watched for)",
    )
    tried = parser.add_argument_group("what is tried")
    tried.add_argument("--kind", metavar="K,K", help="cusum, ewma, shewhart (default: all)")
    tried.add_argument(
        "--size", metavar="N,N,...", help="readings in a subgroup (default: as configured)"
    )
    for option, words in (
        ("--cusum", "K,H"),
        ("--ewma", "LAMBDA,WIDTH"),
        ("--shewhart", "WIDTH"),
    ):
        tried.add_argument(
            option, metavar=words, action="append", default=[], help="these too; repeatable"
        )
    parser.add_argument(
        "--events", metavar="FILE.csv", help="labelled causes and false alarms; see below"
    )
    parser.add_argument("--seed", type=int, default=0, help="of all chance (default 0)")
    parser.add_argument(
        "--jobs", type=int, default=os.cpu_count() or 1, help="threads (default: all cores)"
    )
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout")
    parser.add_argument("--to", metavar="FILE.yaml", help="write the best setting's keys")
    parser.add_argument("--html", metavar="FILE.html", help="write the report as a page")


def main(args: argparse.Namespace) -> int:
    """Judge settings; 1 where --to or the whole has nothing to give."""
    _check_outputs(args)
    if args.html is not None:
        require_plotly()
    plan = _plan(args.config)
    characteristic = inputs.chosen(plan, args.characteristic)
    request = _request(args, characteristic)
    progress = Progress()
    try:
        readings = _read(args, characteristic, progress)
        sources = [Source(path, sha256(path)) for path in args.recordings]
        if args.events is not None:
            request = replace(request, labels=_labels(args.events, readings))
        result = study(readings, sources, request, lambda text: progress(lambda: text))
    finally:
        progress.clear()
    if args.html is not None:
        with files.replacing(args.html) as file:
            file.write(page(result).encode())
    if args.to is not None and result.fragment:
        with files.replacing(args.to) as file:
            file.write(commented(result).encode())
    if args.json:
        sys.stdout.buffer.write(orjson.dumps(as_json(result), option=orjson.OPT_APPEND_NEWLINE))
    elif files.STDOUT not in (args.to, args.html):
        columns = shutil.get_terminal_size((_UNBROKEN, 24)).columns
        print("\n".join(lines(result, max(columns, _LEAST))))
    if args.to is not None and not result.fragment:
        print(
            f"{args.to} was not written: no setting is shown to keep the promise", file=sys.stderr
        )
        return COULD_NOT
    return DONE


def _check_outputs(args: argparse.Namespace) -> None:
    written = [path for path in (args.to, args.html) if path is not None]
    if written.count(files.STDOUT) + args.json > 1:
        raise CommandError("only one of --to -, --html - and --json can have stdout", WRONG)
    named = [os.path.realpath(path) for path in written if path != files.STDOUT]
    if len(set(named)) < len(named):
        raise CommandError("--to and --html name one file: give them one each", WRONG)
    taken = {os.path.realpath(path) for path in (args.config, *args.recordings)}
    for path in named:
        if path in taken:
            raise CommandError(f"{path} is read: write the results elsewhere", WRONG)


def _plan(path: str) -> Plan:
    try:
        return read_plan(Path(path), os.environ)
    except ConfigurationError as error:
        raise CommandError(str(error), WRONG) from None


def _read(
    args: argparse.Namespace, characteristic: CharacteristicPlan, progress: Progress
) -> Readings:
    plan = Plan((characteristic,))
    recordings = [Recording(path) for path in args.recordings]
    gathered = gather(
        plan,
        recordings,
        inputs.layout(plan, args.column),
        inputs.interval(args.interval),
        inputs.teller(progress, len(recordings)),
    )
    progress.clear()
    for line in gathered.unreadable_at:
        print(line, file=sys.stderr)
    more = gathered.unreadable - len(gathered.unreadable_at)
    if more:
        print(f"… and {more:,} more lines that could not be read", file=sys.stderr)
    for note in gathered.notes:
        print(note, file=sys.stderr)
    readings = gathered.readings[characteristic.name]
    if not readings.count:
        raise CommandError(_why_none(gathered, characteristic.name))
    return readings


def _labels(path: str, readings: Readings) -> tuple[labels.Label, ...]:
    found = labels.read(path, [stream_names.name(each.stream) for each in readings.streams])
    first = min(int(each.time[0]) for each in readings.streams)
    last = max(int(each.time[-1]) for each in readings.streams)
    reached = labels.within(found, first, last)
    if len(reached) < len(found):
        print(
            f"{path}: {len(found) - len(reached):,} of {len(found):,} events left out: the "
            f"recording runs from {format_time(first)} to {format_time(last)}",
            file=sys.stderr,
        )
    return reached


def _why_none(gathered: Gathered, name: str) -> str:
    counts = Counter(gathered.readings[name].set_aside) + Counter(gathered.unclaimed)
    said = f"the recordings hold no reading of {name}"
    if not counts:
        return f"{said}, nor anything that was set aside: is this the right file?"
    told = set_aside_words.lines(counts, gathered.set_aside_at)
    entries = f"{gathered.entries:,} message{'' if gathered.entries == 1 else 's'}"
    read = f"{said}. Set aside, of {entries} or rows read for {name} alone:"
    return "\n".join((read, *told))


def _request(args: argparse.Namespace, characteristic: CharacteristicPlan) -> Request:
    section = load_measured(Path(args.config), os.environ).characteristics[characteristic.name]
    asked = intents(characteristic)
    catch = _drifts("--catch", args.catch) or _each([i.catch for i in asked])
    if not catch:
        raise CommandError(
            "--catch is needed: the drift worth catching, in the gauge's unit", WRONG
        )
    if any(each <= 0 for each in catch):
        raise CommandError("--catch: a drift worth catching is above 0, such as 1.5", WRONG)
    ignore = _drifts("--ignore", args.ignore)
    if not ignore:
        configured = _each([i.ignore for i in asked if i.catch is not None])
        ignore = tuple(each for each in configured if each < max(catch)) or (0.0,)
    if any(each < 0 for each in ignore) or min(ignore) >= max(catch):
        raise CommandError(
            f"--ignore {min(ignore):g}, --catch {max(catch):g}: ignore drifts from 0 up, and catch "
            "larger ones",
            WRONG,
        )
    kinds = _KINDS if args.kind is None else tuple(part.strip() for part in args.kind.split(","))
    strange = [kind for kind in kinds if kind not in _KINDS]
    if strange:
        raise CommandError(f"--kind {strange[0]}: write {', '.join(_KINDS)}", WRONG)
    standing = declared(section, characteristic)
    watched = any(role_of(each) == "spread" for each in standing)
    ratio = _ratio(args, asked)
    if args.jobs < 1:
        raise CommandError("--jobs: write a whole number from 1 up", WRONG)
    return Request(
        promise=_promise(args, section, characteristic.name),
        promised=None if section.promise is None else section.promise.false_alarm_every / SECOND,
        catch=catch,
        ignore=tuple(dict.fromkeys(ignore)),
        kinds=cast(tuple[Kind, ...], tuple(dict.fromkeys(kinds))),
        sizes=_sizes(args.size),
        cusums=tuple(_pair("--cusum", text, "K,H, such as 0.5,5") for text in args.cusum),
        ewmas=tuple(_ewma(text) for text in args.ewma),
        shewharts=tuple(_positive("--shewhart", text) for text in args.shewhart),
        ratio=ratio,
        spread=args.catch_ratio is not None or watched,
        declared=standing,
        seed=args.seed,
        jobs=args.jobs,
    )


def _ratio(args: argparse.Namespace, asked: Sequence[Intent]) -> float:
    if args.catch_ratio is None:
        growing = (each.catch_ratio for each in asked)
        return next((ratio for ratio in growing if ratio is not None and ratio > 1), 1.5)
    ratio = _number("--catch-ratio", args.catch_ratio)
    if ratio <= 1:
        raise CommandError("--catch-ratio: write a number above 1, such as 1.5", WRONG)
    return ratio


def _each(values: Sequence[float | None]) -> tuple[float, ...]:
    return tuple(dict.fromkeys(value for value in values if value is not None))


def _promise(args: argparse.Namespace, section: Characteristic, name: str) -> float:
    if args.false_alarm_every is None:
        promise = section.promise
        if promise is None:
            raise CommandError(
                "--false-alarm-every is needed, such as 14d: the configuration promises nothing "
                f"for {name}",
                WRONG,
            )
        return promise.false_alarm_every / SECOND
    try:
        time = parse_duration(args.false_alarm_every)
    except ValueError as error:
        raise CommandError(f"--false-alarm-every: {error}", WRONG) from None
    if time <= 0:
        raise CommandError("--false-alarm-every: write a time, such as 14d", WRONG)
    return time / SECOND


def _drifts(option: str, text: str | None) -> tuple[float, ...]:
    if text is None:
        return ()
    return tuple(dict.fromkeys(_number(option, part) for part in text.split(",")))


def _sizes(text: str | None) -> tuple[int, ...]:
    if text is None:
        return ()
    sizes = [part.strip() for part in text.split(",")]
    if not all(part.isascii() and part.isdigit() and 1 <= int(part) <= 10_000 for part in sizes):
        raise CommandError("--size: write whole numbers from 1 to 10000, such as 1,5,10", WRONG)
    return tuple(dict.fromkeys(map(int, sizes)))


def _ewma(text: str) -> tuple[float, float]:
    lam, width = _pair("--ewma", text, "LAMBDA,WIDTH, such as 0.2,2.962")
    if lam > 1:
        raise CommandError(f"--ewma {text}: lambda is above 0, up to 1", WRONG)
    return lam, width


def _pair(option: str, text: str, form: str) -> tuple[float, float]:
    parts: Sequence[str] = text.split(",")
    if len(parts) != 2:
        raise CommandError(f"{option} {text}: write {form}", WRONG)
    return _positive(option, parts[0]), _positive(option, parts[1])


def _positive(option: str, text: str) -> float:
    number = _number(option, text)
    if number <= 0:
        raise CommandError(f"{option} {text}: write a number above 0", WRONG)
    return number


def _number(option: str, text: str) -> float:
    try:
        number = float(text)
    except ValueError:
        number = math.nan
    if not math.isfinite(number):
        raise CommandError(f"{option} {text}: write a number, such as 1.5", WRONG)
    return number
