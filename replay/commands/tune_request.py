"""What ``tune`` is asked, from its command line and the configuration.

Knows both. Must not know recordings, or how settings are judged.
"""

from __future__ import annotations

import argparse
import itertools
import math
import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import cast

from monitor.commandline import WRONG, CommandError
from monitor.configuration.config import load_measured
from monitor.configuration.sections.characteristic import Characteristic
from monitor.plan import CharacteristicPlan, Intent
from monitor.times import SECOND, parse_duration
from replay.tuning.candidates import Request
from replay.tuning.declared import declared, intents
from replay.tuning.result import Kind
from replay.tuning.shares import role_of

KINDS: tuple[Kind, ...] = ("cusum", "ewma", "shewhart")


def request(args: argparse.Namespace, characteristic: CharacteristicPlan) -> Request:
    """Raises CommandError for what makes no sense."""
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
    for drift, alone in itertools.product(catch, ignore):
        if alone >= drift and args.ignore is not None:
            print(
                f"catch {drift:g} is not tried with ignore {alone:g}, which is not smaller "
                "(numbers in a list stand apart by commas: 1.5,3)",
                file=sys.stderr,
            )
    kinds = KINDS if args.kind is None else tuple(part.strip() for part in args.kind.split(","))
    strange = [kind for kind in kinds if kind not in KINDS]
    if strange:
        raise CommandError(f"--kind {strange[0]}: write {', '.join(KINDS)}", WRONG)
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
