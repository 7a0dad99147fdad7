"""Labelled events: when something was really wrong, and which alarms the crew called false.

Knows the table of labels. Must not know detectors.
"""

from __future__ import annotations

import csv
from collections.abc import Collection, Sequence
from dataclasses import dataclass
from typing import Literal

from monitor import stream_names
from monitor.commandline import WRONG, CommandError
from monitor.times import SECOND
from replay.moments import arrival

HELP = """\
labelled events: a table (CSV) with the columns time and what, and optionally until and stream.
what is cause (something was really wrong from time until until; without until, half an hour) or
false (the crew called an alarm at time false; without until, five minutes around it). time and
until are ISO 8601 with Z or an offset, or epoch seconds; stream is written head=4;lane=1, and all
streams are meant where it is empty. Causes are left out of fitting and of counting false alarms.
"""

_CAUSE = 1_800 * SECOND
_FALSE = 300 * SECOND


@dataclass(frozen=True, slots=True)
class Label:
    """One event, in instants (µs); ``stream`` is a name, None for all of them."""

    what: Literal["cause", "false"]
    begin: int
    end: int
    stream: str | None

    def concerns(self, stream: str) -> bool:
        """Whether it is about that stream."""
        return self.stream is None or self.stream == stream


def read(path: str, streams: Collection[str]) -> tuple[Label, ...]:
    """The labels in a file; ``streams`` are the names there are. Raises CommandError, with the
    line, where one cannot be understood."""
    try:
        with open(path, encoding="utf-8-sig", newline="") as file:
            rows = csv.DictReader(file)
            missing = {"time", "what"} - set(rows.fieldnames or ())
            if missing:
                raise CommandError(f"{path} has no column {sorted(missing)[0]!r}: {HELP}", WRONG)
            return tuple(_label(f"{path}:{rows.line_num}", row, streams) for row in rows)
    except OSError as error:
        raise CommandError(f"cannot read {path}: {error.strerror}") from error
    except (UnicodeDecodeError, csv.Error) as error:
        raise CommandError(f"cannot read {path} as a table: {error}") from error


def within(labels: Sequence[Label], first: int, last: int) -> tuple[Label, ...]:
    """Those that the recording reaches into, from its ``first`` to its ``last`` instant (µs): no
    setting could have rung for others, nor kept quiet."""
    return tuple(each for each in labels if each.begin <= last and each.end >= first)


def _label(where: str, row: dict[str, str | None], streams: Collection[str]) -> Label:
    what = (row.get("what") or "").strip()
    if what not in ("cause", "false"):
        raise CommandError(f"{where}: what is {what!r}: write cause or false", WRONG)
    begin = _instant(where, "time", row.get("time"))
    if begin is None:
        raise CommandError(f"{where}: time is empty: write when it was", WRONG)
    end = _instant(where, "until", row.get("until"))
    if end is not None and end < begin:
        raise CommandError(f"{where}: until lies before time: mend one of them", WRONG)
    stream = (row.get("stream") or "").strip() or None
    if stream is not None:
        try:
            stream = stream_names.name(stream_names.parse(stream))
        except ValueError as error:
            raise CommandError(f"{where}: stream {stream!r} {error}", WRONG) from None
        if stream not in streams:
            known = ", ".join(sorted(streams)[:6]) or "the only one: leave it empty"
            raise CommandError(f"{where}: no readings of stream {stream}; there is {known}", WRONG)
    if what == "cause":
        return Label("cause", begin, begin + _CAUSE if end is None else end, stream)
    if end is None:
        return Label("false", begin - _FALSE, begin + _FALSE, stream)
    return Label("false", begin, end, stream)


def _instant(where: str, column: str, cell: str | None) -> int | None:
    text = (cell or "").strip()
    if not text:
        return None
    moment = arrival(text)
    if moment is None:
        wrong = f"{where}: {column} {text!r} is no instant: write 2026-03-02T06:41:12Z"
        raise CommandError(wrong, WRONG)
    return moment
