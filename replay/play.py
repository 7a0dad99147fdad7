"""Playing recordings: entries into the engine, its outputs into files and a record.

Knows the engine's inputs and outputs. Must not know the command line, or how the record is worded.
"""

from __future__ import annotations

import itertools
from collections import Counter
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from time import perf_counter
from typing import IO

from monitor import messages
from monitor.engine import Engine
from monitor.messages import AlertEvent
from monitor.outputs import Alert, Output, Points, SetAside
from monitor.plan import Plan
from monitor.stream import Counts
from replay.merging import in_order
from replay.points import HEADER, PointsTable, name_stream
from replay.recordings import Chunk, Recording
from replay.tables import FIRST_ROW, Layout

OnProgress = Callable[[Chunk], None]
"""Told what has just been played, every few hundred lines."""

KEPT = 20
"""Alert events kept for showing; the files have them all."""

_EXAMPLES = 5


@dataclass(slots=True)
class Played:
    """What a play read and found; times in microseconds, ``seconds`` of our own time."""

    counts: Counts
    entries: int = 0
    first: int | None = None
    last: int | None = None
    backwards: int = 0
    """Messages that arrived before one recorded earlier."""
    backwards_at: str = ""
    unreadable: int = 0
    unreadable_at: list[str] = field(default_factory=list)
    """The first few: file, line, what is wrong."""
    set_aside_at: dict[str, tuple[str, SetAside]] = field(default_factory=dict)
    """The first of each reason: file and line, and what it was."""
    raised: Counter[tuple[str, str, str, str]] = field(default_factory=Counter)
    """Alerts raised, by characteristic, stream, detector and rule."""
    events: list[AlertEvent] = field(default_factory=list)
    """The first ``KEPT`` alert events."""
    streams: list[tuple[str, str, int]] = field(default_factory=list)
    """Every stream that had a reading: characteristic, stream, subgroups."""
    unread: list[str] = field(default_factory=list)
    """Characteristics without one."""
    seconds: float = 0.0


def play(
    plan: Plan,
    recordings: Iterable[Recording],
    layout: Layout,
    interval: int,
    *,
    alerts: IO[bytes] | None = None,
    points: IO[bytes] | None = None,
    progress: OnProgress,
) -> Played:
    """Play recordings as one stream, in order of arrival.

    ``layout`` says how tables are read, ``interval`` (µs) how far apart their rows are where they
    have no times. Alert events go to ``alerts`` as lines, points to ``points`` as a table. Raises
    CommandError where a recording cannot be read.
    """
    started = perf_counter()
    engine = Engine(plan, points=points is not None)
    player = _Player(engine, alerts, points)
    clock = itertools.count(FIRST_ROW, interval)
    opened = [recording.open(layout, clock, player.unreadable) for recording in recordings]
    for chunk in in_order(opened):
        player.play(chunk)
        progress(chunk)
    played = player.played
    played.streams = sorted(
        (state.plan.name, name_stream(state.stream), state.last.number if state.last else 0)
        for state in engine.streams()
    )
    read = {characteristic for characteristic, _, _ in played.streams}
    played.unread = [c.name for c in plan.characteristics if c.name not in read]
    played.seconds = perf_counter() - started
    return played


class _Player:
    def __init__(self, engine: Engine, alerts: IO[bytes] | None, points: IO[bytes] | None) -> None:
        self.played = Played(engine.counts)
        self._engine = engine
        self._alerts = alerts
        self._points = points
        self._table = PointsTable()
        if points is not None:
            points.write(HEADER)

    def unreadable(self, recording: Recording, number: int, wrong: str) -> None:
        played = self.played
        played.unreadable += 1
        if len(played.unreadable_at) < _EXAMPLES:
            played.unreadable_at.append(f"{recording.path}:{number}: {wrong}")

    def play(self, chunk: Chunk) -> None:
        played, fold = self.played, self._engine.fold
        last, entries = played.last, 0
        for number, entry in enumerate(chunk.entries, chunk.first):
            if entry is None:
                continue
            entries += 1
            time = entry.time
            if last is None:
                played.first = last = time
            elif time >= last:
                last = time
            else:
                self._note_backwards(time, chunk.recording, number)
            outputs = fold(entry)
            if outputs:
                self._take(outputs, chunk.recording, number)
        played.entries += entries
        played.last = last

    def _take(self, outputs: Sequence[Output], recording: Recording, number: int) -> None:
        played = self.played
        for output in outputs:
            if type(output) is Points:
                if self._points is not None:
                    self._points.write(self._table.rows(output))
            elif type(output) is SetAside:
                if output.reason not in played.set_aside_at:
                    played.set_aside_at[output.reason] = f"{recording.path}:{number}", output
            elif type(output) is Alert:
                self._alert(output)

    def _alert(self, alert: Alert) -> None:
        event = alert.event
        if self._alerts is not None:
            self._alerts.write(messages.encode(event) + b"\n")
        if len(self.played.events) < KEPT:
            self.played.events.append(event)
        if event["event"] == "raised":
            stream = name_stream(alert.stream)
            key = alert.characteristic.name, stream, event["detector"], event["rule"]
            self.played.raised[key] += 1

    def _note_backwards(self, time: int, recording: Recording, number: int) -> None:
        played = self.played
        if played.first is None or time < played.first:
            played.first = time
        played.backwards += 1
        played.backwards_at = played.backwards_at or f"{recording.path}:{number}"
