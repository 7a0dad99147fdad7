"""``driftbell-replay design``: run lengths of a detector, or the detector for a wanted run length.

Knows the command's arguments and how the answer is printed. Must not know how it is worked out.
"""

from __future__ import annotations

import argparse
import sys
from functools import partial

import orjson
from pydantic import TypeAdapter, ValidationError

from monitor import files, runlengths
from monitor.commandline import DONE, WRONG, CommandError
from monitor.configuration.presets import OUTSIDE_LIMITS, PRESETS, preset
from monitor.configuration.sections.scalars import Rate
from monitor.plan import CusumPlan, EwmaPlan, Scheme, ShewhartPlan
from monitor.times import SECOND, parse_duration
from replay.design import as_json, design
from replay.design_page import page
from replay.design_words import lines

_EXAMPLES = """\
shifts and widths are in standard errors of the charted statistic, run lengths in subgroups

  driftbell-replay design --cusum 0.5,5
  driftbell-replay design --shewhart 3 --rules western-electric-1956 --shifts 0,0.5,1,2
  driftbell-replay design --catch 1 --run-length 10000
  driftbell-replay design --catch 1 --ignore 0.2 --false-alarm-every 14d --rate 120/min --kind ewma
"""
_SHIFTS = (0.0, 0.5, 1.0, 2.0)
_CURVE = 40

_SHORTEST = 2.0
"""Subgroups between false alarms; more often than every other one is no question."""


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EXAMPLES
    asked = parser.add_argument_group("one of these").add_mutually_exclusive_group(required=True)
    asked.add_argument("--shewhart", metavar="WIDTH", help="a Shewhart chart")
    asked.add_argument("--cusum", metavar="K,H", help="a tabular CUSUM")
    asked.add_argument("--ewma", metavar="LAMBDA,WIDTH", help="an EWMA")
    asked.add_argument(
        "--catch", metavar="D", help="work out the detector for a shift of this size"
    )
    of_scheme = parser.add_argument_group("more about the detector")
    of_scheme.add_argument(
        "--rules", choices=PRESETS, help=f"of a Shewhart chart (default {OUTSIDE_LIMITS})"
    )
    of_scheme.add_argument(
        "--head-start", metavar="F", help="of a CUSUM: a fraction of h (default 0)"
    )
    of_scheme.add_argument(
        "--limits", choices=("exact", "asymptotic"), help="of an EWMA (default exact)"
    )
    of_scheme.add_argument(
        "--direction", choices=("both", "up", "down"), default="both", help="default both"
    )
    wanted = parser.add_argument_group("with --catch")
    wanted.add_argument("--run-length", metavar="N", help="subgroups between false alarms")
    wanted.add_argument("--false-alarm-every", metavar="14d", help="the same as a time")
    wanted.add_argument("--ignore", metavar="E", help="the shift to leave alone (default 0)")
    wanted.add_argument(
        "--kind", choices=("cusum", "ewma", "shewhart"), help="of detector (default cusum)"
    )
    parser.add_argument(
        "--rate", metavar="120/min", help="subgroups a time: answers are given as times too"
    )
    parser.add_argument(
        "--shifts",
        metavar="S,S,...",
        help="where to look (default 0,0.5,1,2, negative with --direction down)",
    )
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout")
    parser.add_argument("--html", metavar="FILE.html", help="write a page with the curve")


def main(args: argparse.Namespace) -> int:
    """Print what the detector delivers."""
    _refuse_what_does_not_go_together(args)
    side = -1.0 if args.direction == "down" else 1.0
    if args.shifts is None:
        shifts = [side * shift for shift in _SHIFTS]
    else:
        shifts = [_number("--shifts", part, low=-20) for part in args.shifts.split(",")]
    rate = None if args.rate is None else _rate(args.rate)
    ignore, told = 0.0, 1.0
    if args.catch is None:
        scheme = _scheme(args)
    else:
        ignore = 0.0 if args.ignore is None else _number("--ignore", args.ignore, low=0)
        told = _number("--catch", args.catch, low=0.01)
        scheme = _solved(args, told, ignore, rate)
        shifts += [side * ignore, side * told]
    worked_out = partial(
        design, scheme, ignore=ignore, told=told, rules=args.rules or OUTSIDE_LIMITS, rate=rate
    )
    try:
        found = worked_out(shifts)
    except ValueError as error:
        instead = "write other constants"
        if args.catch is not None:
            instead = "catch a larger drift, or ignore less"
            instead += ", or take a CUSUM" if args.kind == "ewma" else ""
        raise CommandError(f"{error}: {instead}") from None
    if args.html is not None:
        # A simulated curve is drawn through what is told: each of its points takes its time.
        low, high = min(shifts), max(shifts)
        between = [low + (high - low) * i / _CURVE for i in range(_CURVE + 1)]
        curve = found if found.interval.standard_error else worked_out(shifts + between)
        with files.replacing(args.html) as file:
            file.write(page(found, curve).encode())
    if args.json:
        sys.stdout.buffer.write(orjson.dumps(as_json(found), option=orjson.OPT_APPEND_NEWLINE))
    elif args.html != files.STDOUT:
        print("\n".join(lines(found, speak=sys.stdout.isatty())))
    return DONE


def _refuse_what_does_not_go_together(args: argparse.Namespace) -> None:
    solving = args.catch is not None
    kind = args.kind or "cusum"
    for option, given, fits, instead in (
        ("--rules", args.rules, args.shewhart is not None, "--shewhart"),
        ("--head-start", args.head_start, args.cusum or (solving and kind == "cusum"), "a CUSUM"),
        ("--limits", args.limits, args.ewma or (solving and kind == "ewma"), "an EWMA"),
        ("--run-length", args.run_length, solving, "--catch"),
        ("--false-alarm-every", args.false_alarm_every, solving, "--catch"),
        ("--ignore", args.ignore, solving, "--catch"),
        ("--kind", args.kind, solving, "--catch"),
    ):
        if given is not None and not fits:
            raise CommandError(f"{option} goes with {instead}", WRONG)
    if solving and (args.run_length is None) == (args.false_alarm_every is None):
        raise CommandError("--catch needs one of --run-length and --false-alarm-every", WRONG)
    if args.false_alarm_every is not None and args.rate is None:
        raise CommandError("--false-alarm-every needs --rate, such as --rate 120/min", WRONG)
    if args.json and args.html == files.STDOUT:
        raise CommandError("only one of --json and --html - can have stdout", WRONG)


def _scheme(args: argparse.Namespace) -> Scheme:
    if args.cusum is not None:
        k, h = _pair("--cusum", args.cusum, "K,H, such as 0.5,5")
        _within("--cusum", "K", k, 0, 20)
        _within("--cusum", "H", h, 0.01, 300)
        return CusumPlan("mean", k, h, _head_start(args), direction=args.direction)
    if args.ewma is not None:
        lam, width = _pair("--ewma", args.ewma, "LAMBDA,WIDTH, such as 0.2,2.962")
        _within("--ewma", "LAMBDA", lam, 0.001, 1)
        _within("--ewma", "WIDTH", width, 0.1, 20)
        asymptotic = args.limits == "asymptotic"
        return EwmaPlan("mean", lam, width, asymptotic, direction=args.direction)
    width = _number("--shewhart", args.shewhart, low=0.1, high=30)
    return ShewhartPlan("mean", width, preset(args.rules or OUTSIDE_LIMITS, width), args.direction)


def _solved(args: argparse.Namespace, catch: float, ignore: float, rate: float | None) -> Scheme:
    if catch <= ignore:
        raise CommandError(f"--ignore {ignore:g} is no smaller than --catch {catch:g}", WRONG)
    if args.run_length is not None:
        interval = _number("--run-length", args.run_length, low=_SHORTEST, high=1e15)
    else:
        assert rate is not None  # refused above
        interval = _duration(args.false_alarm_every) * rate
        _within("--false-alarm-every", "times --rate", interval, _SHORTEST, 1e15)
    kind: runlengths.Kind = args.kind or "cusum"
    try:
        return runlengths.solve(
            kind,
            catch,
            interval,
            ignore=ignore,
            direction=args.direction,
            head_start=_head_start(args),
            asymptotic=args.limits == "asymptotic",
        )
    except ValueError:
        raise CommandError(
            f"no {kind} that is to catch {catch:g} and ignore {ignore:g} has a run length of "
            f"{interval:,.6g}: ask for a longer one, a larger --catch or a smaller --head-start"
        ) from None


def _head_start(args: argparse.Namespace) -> float:
    if args.head_start is None:
        return 0.0
    return _number("--head-start", args.head_start, low=0, high=0.99)


def _pair(option: str, text: str, form: str) -> tuple[float, float]:
    parts = text.split(",")
    try:
        first, second = (float(part) for part in parts)
    except ValueError:
        raise CommandError(f"{option} {text}: write {form}", WRONG) from None
    return first, second


def _number(option: str, text: str, *, low: float, high: float = 20) -> float:
    try:
        number = float(text)
    except ValueError:
        said = f"{text.strip()!r} is not a number" if text.strip() else "a number is missing"
        raise CommandError(f"{option} {text}: {said}".replace(" :", ":"), WRONG) from None
    _within(option, text, number, low, high)
    return number


def _within(option: str, what: str, number: float, low: float, high: float) -> None:
    if not low <= number <= high:  # NaN is neither
        raise CommandError(f"{option}: {what} must be from {low:g} to {high:g}", WRONG)


def _duration(text: str) -> float:
    try:
        return parse_duration(text) / SECOND
    except ValueError as error:
        raise CommandError(f"--false-alarm-every: {error}", WRONG) from None


def _rate(text: str) -> float:
    try:
        return TypeAdapter(Rate).validate_python(text)
    except ValidationError:
        raise CommandError(
            f"--rate {text}: write a number above 0 a s, min, h or d, such as 120/min", WRONG
        ) from None
