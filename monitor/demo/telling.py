"""What the demo says: at the start, at each alert, and at the end.

Knows words and layout, in the order its reader asks: which gauge, what changed, since when, by how
much, what to do; what was missed, what was false, what next. Must not know MQTT or processes.
"""

from __future__ import annotations

import os
import shutil
import sys
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from monitor import times
from monitor.demo.line import UNDATED, UNITS
from monitor.demo.scenes import Cause, Scene
from monitor.demo.score import Finding, elapsed
from monitor.messages import AlertEvent, CountsField


@dataclass(frozen=True, slots=True)
class Clock:
    """The line's clock: ``start`` in µs since 1970, ``seconds`` of line time to run, ``speed`` in
    line seconds a second; ``begun`` is when it began to run by this computer's clock,
    where that is not its own."""

    start: int
    seconds: float
    speed: float
    begun: int | None = None

    def at(self, elapsed_seconds: float) -> int:
        """The instant, µs since 1970."""
        return self.start + round(elapsed_seconds * times.SECOND)

    def face(self, elapsed_seconds: float) -> str:
        """``06:41:12``, UTC."""
        return times.format_time(self.at(elapsed_seconds))[11:19]

    def elapsed_at(self, instant: int) -> float:
        """Seconds of line time at an instant of this computer's clock."""
        begun = self.start if self.begun is None else self.begun
        return (instant - begun) / times.SECOND * self.speed


_INDENT = " " * 10


def opening(scene: Scene, clock: Clock, broker: str, folder: Path) -> str:
    """What is about to run, and where it leaves its files."""
    lines = [
        _filled(
            f"Jar line 2, simulated: {scene.title}. Six fill heads, 600 jars a minute;"
            f" {clock.seconds / 60:.0f} min of line time in {clock.seconds / clock.speed:.0f} s."
        ),
        f"Broker: {broker}. Configuration, journal and log: {folder}",
    ]
    if clock.speed > 1:
        lines.append(
            _filled(
                "The torque gauge sends bare numbers, which are dated by their arrival. The broker"
                " and the journal have that by this computer's clock, for which the line runs"
                f" {clock.speed:.0f} times too fast; here it is turned into the line's time."
            )
        )
    return "\n".join([*lines, ""])


def alert(event: AlertEvent, clock: Clock) -> str:
    """One alert, at the line's time: what happened, then what to do about it."""
    what = f"{clock.face(elapsed(event))}  {_at_the_line(event, clock)}"
    to_do = event["reaction"] if event["event"] in ("raised", "rejoined") else []
    return "\n".join(
        _filled(paragraph, subsequent=_INDENT)
        for paragraph in [what, *(_INDENT + each for each in to_do)]
    )


def _at_the_line(event: AlertEvent, clock: Clock) -> str:
    """The sentence, with the line's time also where a gauge gave none: its arrivals lie as close
    together as the line is fast, so that a change would seem to begin after it was found."""
    shift, text = event["shift"], event["text"]
    if event["characteristic"] not in UNDATED or shift is None:
        return text
    onset = times.parse_iso_time(shift["onset"])
    return text.replace(shift["onset"][11:19], clock.face(clock.elapsed_at(onset)))


def progress(reached: float, clock: Clock, sent: int) -> str:
    """How far the line is, on one line of a terminal."""
    done, whole = (f"{int(s) // 60}:{int(s) % 60:02}" for s in (reached, clock.seconds))
    return f"line time {done} of {whole}, {sent:,} messages sent"


def closing(
    findings: Sequence[Finding],
    false: Sequence[AlertEvent],
    clock: Clock,
    stopped: float | None,
    sent: int,
    counts: CountsField | None,
) -> str:
    """What was put in against what was found, then what was false, then what was read.

    ``stopped`` is where the line was stopped early, in seconds of line time; None if it was not.
    """
    missed = "NOT FOUND" if stopped is None else "not yet"
    rows = [("put in", "began", "found after", "mean shift", "alert said")]
    rows += [_row(finding, clock, missed) for finding in findings]
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    table = ["  " + "  ".join(map(str.ljust, row, widths)).rstrip() for row in rows]
    rang = " ".join(f"{clock.face(elapsed(event))} {_at_the_line(event, clock)}" for event in false)
    notes = [f"False alarms: {rang or 'none.'}"]
    if stopped is not None:
        notes.append(f"Stopped early, {stopped:.0f} s into the line's {clock.seconds:.0f} s.")
    if counts is not None:
        reasons = ", ".join(f"{count} {reason}" for reason, count in counts["set_aside"].items())
        notes.append(
            f"Messages: {sent:,} sent, {counts['messages']:,} read; set aside: {reasons or 'none'}."
        )
    notes.append(
        "Times are the line's, UTC; seconds are line time, readings those of the one stream. The"
        " mean shift, from its beginning to the alert, is what the alert estimates."
    )
    filled = (_filled(note, first="  ", subsequent="    ") for note in notes)
    return "\n".join(["", "What was put in, and what was found", *table, *filled, ""])


def _row(finding: Finding, clock: Clock, missed: str) -> tuple[str, str, str, str, str]:
    cause = finding.cause
    began = clock.face(cause.onset)
    if finding.alert is None:
        return cause.text, began, missed, "", ""
    shift, said = (
        "" if size is None else signed(size, cause) for size in (finding.size, finding.said)
    )
    return cause.text, began, f"{finding.seconds:.0f} s, {finding.readings} readings", shift, said


def put_in(cause: Cause, clock: Clock) -> str:
    """One cause in words: what, from when, how fast, how much."""
    size = (
        signed(cause.size, cause) if cause.kind == "shift" else f"{cause.size:g} times the spread"
    )
    how = f"growing over {cause.growth:.0f} s" if cause.growth else "at once"
    return f"{cause.text}: from {times.format_time(clock.at(cause.onset))}, {how}, to {size}"


def signed(size: float, cause: Cause) -> str:
    """``−0.15 N·m``."""
    return f"{size:+.2g} {UNITS[cause.characteristic]}".replace("-", "−")


def next_steps(configuration: Path, journal: Path) -> str:
    """Commands that work as they stand, as this program was called."""
    folder = configuration.parent
    driftbell, replay = program("driftbell", "monitor"), program("driftbell-replay", "replay")
    recording = folder / "heard.jsonl"
    steps = [
        ("what this configuration does, in words", f"{driftbell} check {configuration}"),
        ("what the daemon heard, as a recording", f"{driftbell} export {journal} --to {recording}"),
        (
            "the same engine over that recording: the same alerts, and every point as a table",
            f"{replay} play {configuration} {recording} --points {folder / 'points.csv'}",
        ),
    ]
    lines = [line for why, command in steps for line in (f"  # {why}", f"  {command}")]
    return "\n".join(["What to try next", *lines])


def program(name: str, package: str) -> str:
    """How to call ``name`` from where the user is: as this program was called."""
    called = Path(sys.argv[0])
    if called.stem == "driftbell":
        beside = called.with_name(name)
        found = shutil.which(name)
        on_path = found is not None and os.path.realpath(found) == os.path.realpath(beside)
        return name if on_path else str(beside)
    return f"{sys.executable} -m {package}"


def _filled(text: str, first: str = "", subsequent: str = "") -> str:
    width = max(60, min(shutil.get_terminal_size((100, 24)).columns, 100))
    return textwrap.fill(text, width, initial_indent=first, subsequent_indent=subsequent)
