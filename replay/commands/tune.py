"""``driftbell-replay tune``: its arguments, its progress and where the answer goes.

Knows the terminal. Must not know how settings are judged or how the answer is worded.
"""

from __future__ import annotations

import argparse
import os
import shutil
import sys
from collections import Counter
from dataclasses import replace
from pathlib import Path

import orjson
import yaml

from monitor import files, stream_names
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.config import load_measured
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import plan_of, read_plan
from monitor.plan import CharacteristicPlan, Plan
from monitor.progress import Progress
from monitor.times import format_time
from replay import set_aside_words
from replay.commands import inputs, tune_request
from replay.readings import Gathered, Readings, gather, sha256
from replay.recordings import Recording
from replay.tuning import labels
from replay.tuning.as_json import as_json
from replay.tuning.declared import declared
from replay.tuning.foreseen import Proposed
from replay.tuning.report import page, require_plotly
from replay.tuning.result import Source
from replay.tuning.study import study
from replay.tuning.words import commented, lines

_UNBROKEN = 160
"""Columns where there is no terminal, so that a row of a table is a line."""

_LEAST = 60

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
    request = tune_request.request(args, characteristic)
    progress = Progress()
    try:
        readings = _read(args, characteristic, progress)
        sources = [Source(path, sha256(path)) for path in args.recordings]
        if args.events is not None:
            request = replace(request, labels=_labels(args.events, readings))
        result = study(
            readings,
            sources,
            request,
            lambda text: progress(lambda: text),
            lambda text: _proposed(args.config, characteristic.name, text),
        )
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


def _proposed(config: str, name: str, fragment: str) -> Proposed | None:
    keys = yaml.safe_load(fragment)["characteristics"]
    try:
        document = load_measured(Path(config), os.environ, instead=keys)
    except ConfigurationError:
        return None
    plan = next(each for each in plan_of(document).characteristics if each.name == name)
    return Proposed(plan, declared(document.characteristics[name], plan))


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
