"""``driftbell-replay baseline``: its arguments, its progress, and where the baseline is written.

Knows the terminal. Must not know how a baseline is estimated or worded.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

import orjson

from monitor import files, times
from monitor.baselining.assess import Baselines
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_plan
from monitor.plan import CharacteristicPlan, Plan
from monitor.progress import Progress
from replay import baseline_file, baseline_words, set_aside_words
from replay.baseline import Choices, Estimated, baseline, unmatched
from replay.baseline_json import as_json
from replay.commands import inputs
from replay.readings import Gathered, Readings, gather, sha256
from replay.recordings import Recording

_OUTSIDE = "outside"


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    inputs.configure(parser)
    parser.add_argument(
        "--to",
        metavar="FILE.yaml",
        help="write the baseline, unless it is refused; without it, only say what was found",
    )
    parser.add_argument(
        "--characteristic", metavar="NAME", help="whose baseline, where CONFIG has several"
    )
    parser.add_argument(
        "--leave-out",
        metavar="TIME|FROM/TO|outside",
        action="append",
        default=[],
        help="subgroups not to estimate from: those of a moment or a span of time (ISO 8601 with "
        "an offset), or all that lie outside; repeatable. A time at which there is no reading is "
        "refused",
    )
    parser.add_argument(
        "--sigma",
        choices=("pooled", "range", "sd"),
        default="pooled",
        help="how sigma is estimated within subgroups (default: pooled); of single readings it "
        "always comes from their moving range",
    )
    parser.add_argument(
        "--between",
        choices=("components", "moving-range", "none"),
        default="components",
        help="how sigma_between is estimated: from components of variance (default), from the "
        "moving range of subgroup means, or not at all",
    )
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout")


def main(args: argparse.Namespace) -> int:
    """Estimate, judge, say so and write; 1 where the baseline is refused or there is none."""
    if args.to is not None:
        _check_target(args)
    choices = _choices(args)
    configured = _plan(args.config, {})
    plan = inputs.chosen(configured, args.characteristic)
    layout, interval = inputs.layout(configured, args.column), inputs.interval(args.interval)
    recordings = [Recording(path) for path in args.recordings]
    progress = Progress()
    try:
        gathered = gather(
            Plan((plan,)), recordings, layout, interval, inputs.teller(progress, len(recordings))
        )
        progress.clear()
        _complain(gathered)
        _check_left_out(args.leave_out, choices, gathered.readings[plan.name])
        configured_with = _ConfiguredWith(args.config, plan.name)
        estimated = _estimated(
            gathered, plan, choices, configured_with, lambda text: progress(lambda: text)
        )
    finally:
        progress.clear()
    refused = estimated.assessment.verdict == "refuse"
    if configured_with.problems is not None and not refused:
        # What check would say of CONFIG with this baseline: there is nothing to use it with.
        raise CommandError(str(configured_with.problems), WRONG)
    if args.to is not None and not refused:
        _write(args, estimated, choices)
    _show(args, estimated)
    return COULD_NOT if refused else DONE


def _check_target(args: argparse.Namespace) -> None:
    target, config = Path(os.path.realpath(args.to)), Path(os.path.realpath(args.config))
    if args.to == files.STDOUT:
        raise CommandError("--to: give a file that the configuration can name", WRONG)
    if str(target) in [os.path.realpath(path) for path in (*args.recordings, args.config)]:
        raise CommandError(f"--to {args.to} would replace what is read: write elsewhere", WRONG)
    if config.is_dir() and target.parent == config and target.suffix == ".yaml":
        raise CommandError(
            f"--to {args.to} would be read as a part of the configuration: write into a folder "
            f"below it, such as {Path(args.config, 'baselines', target.name)}",
            WRONG,
        )


def _choices(args: argparse.Namespace) -> Choices:
    spans: list[tuple[int, int]] = []
    for each in args.leave_out:
        if each == _OUTSIDE:
            continue
        parts = each.split("/")
        try:
            moments = [times.parse_iso_time(part.strip()) for part in parts]
        except (ValueError, OverflowError):
            moments = []
        if len(moments) not in (1, 2) or moments[0] > moments[-1]:
            raise CommandError(
                f"--leave-out {each}: write a time such as 2026-03-02T06:41:12Z, two of them "
                "in order with / between, or the word outside",
                WRONG,
            )
        spans.append((moments[0], moments[-1]))
    return Choices(args.sigma, args.between, tuple(spans), _OUTSIDE in args.leave_out)


def _plan(path: str, baselines: Mapping[str, Mapping[str, Any]]) -> Plan:
    try:
        return read_plan(Path(path), os.environ, baselines)
    except ConfigurationError as error:
        raise CommandError(str(error), WRONG) from None


class _ConfiguredWith:
    """What CONFIG declares, its detectors solved on a baseline that was estimated; ``problems``
    says what stands in the way, if anything does."""

    def __init__(self, config: str, name: str) -> None:
        self._config, self._name = config, name
        self.problems: ConfigurationError | None = None

    def __call__(self, found: Baselines) -> CharacteristicPlan | None:
        values = {self._name: baseline_file.values(found)}
        try:
            plan = read_plan(Path(self._config), os.environ, values)
        except ConfigurationError as error:
            self.problems = error
            return None
        (own,) = (each for each in plan.characteristics if each.name == self._name)
        return own


def _complain(gathered: Gathered) -> None:
    for line in gathered.unreadable_at:
        print(line, file=sys.stderr)
    more = gathered.unreadable - len(gathered.unreadable_at)
    if more:
        print(f"… and {more:,} more lines that could not be read", file=sys.stderr)
    for note in gathered.notes:
        print(note, file=sys.stderr)


def _check_left_out(asked: Sequence[str], choices: Choices, readings: Readings) -> None:
    """A mistyped day would put the very fault into the baseline that it was to keep out."""
    if not readings.count:
        return
    texts = [text for text in asked if text != _OUTSIDE]
    wrong = [
        f"--leave-out {text}: the recording has no reading of {readings.plan.name} then"
        for text, span in zip(texts, choices.spans, strict=True)
        if unmatched(readings, span)
    ]
    if wrong:
        first = min(int(each.time[0]) for each in readings.streams)
        last = max(int(each.time[-1]) for each in readings.streams)
        runs = f"It runs from {times.format_time(first)} to {times.format_time(last)}"
        raise CommandError("\n".join((*wrong, f"{runs}: correct the time, or drop it.")), WRONG)


def _estimated(
    gathered: Gathered,
    plan: CharacteristicPlan,
    choices: Choices,
    configured_with: _ConfiguredWith,
    tell: Callable[[str], None],
) -> Estimated:
    readings = gathered.readings[plan.name]
    try:
        return baseline(readings, choices, configured_with, tell)
    except ValueError:
        pass
    wrong = [f"no stream of {plan.name} has two subgroups to estimate from"]
    used = readings.count
    wrong.append(f"  {used:,} {'reading was' if used == 1 else 'readings were'} used")
    # Of a recording that holds other characteristics too, most is nobody's here.
    aside = readings.set_aside if used else readings.set_aside | gathered.unclaimed
    if aside:
        wrong[-1] += f"; set aside {sum(aside.values()):,}:"
        wrong += set_aside_words.lines(aside, gathered.set_aside_at)
    elif not used:
        wrong[-1] += ": the recording holds nothing of it"
    if not used and "no-topic" in aside:
        wrong.append(f"  {plan.name} listens to {plan.source.topic}")
    raise CommandError("\n".join(wrong))


def _write(args: argparse.Namespace, estimated: Estimated, choices: Choices) -> None:
    recordings = [
        baseline_file.RecordedFile(os.path.basename(path), sha256(path)) for path in args.recordings
    ]
    note = baseline_words.note(estimated)
    with files.replacing(args.to) as file:
        file.write(baseline_file.text(estimated, choices, recordings, note).encode())


def _show(args: argparse.Namespace, estimated: Estimated) -> None:
    refused = estimated.assessment.verdict == "refuse"
    written = None if refused else args.to
    if args.json:
        document = as_json(estimated, written)
        sys.stdout.buffer.write(orjson.dumps(document, option=orjson.OPT_APPEND_NEWLINE))
        return
    lines = [
        *baseline_words.verdict(estimated),
        *baseline_words.body(estimated),
        "",
        *baseline_words.next_steps(
            estimated, written, _as_named(args.config, args.to) if args.to else None, args.config
        ),
    ]
    print("\n".join(lines))


def _as_named(config: str, target: str) -> str:
    """The path of the baseline file as the configuration would name it."""
    folder = config if os.path.isdir(config) else os.path.dirname(config)
    return os.path.relpath(os.path.realpath(target), os.path.realpath(folder or "."))
