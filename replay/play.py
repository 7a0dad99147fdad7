"""Playing recordings: entries into the engine, its outputs into files and a record.

Knows the engine's inputs and outputs. Must not know the command line, or how the record is worded.
"""

from __future__ import annotations

import itertools
from collections import Counter
from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict, dataclass, field
from time import perf_counter
from typing import IO

from monitor import messages, stream_names
from monitor.commandline import CommandError
from monitor.engine import Engine
from monitor.entries import Configured, Parsed, State
from monitor.messages import AlertEvent
from monitor.outputs import Alert, Output, Points, SetAside
from monitor.pinning import pinned
from monitor.plan import Plan
from monitor.stream import Counts
from replay.merging import in_order
from replay.points import HEADER, PointsTable
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
    notes: list[str] = field(default_factory=list)
    """What else is to be known of the recordings, each with its file and line."""
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
    player = _Player(plan, alerts, points)
    clock = itertools.count(FIRST_ROW, interval)
    opened = [recording.open(layout, clock, player.unreadable) for recording in recordings]
    for chunk in in_order(opened):
        player.play(chunk)
        progress(chunk)
    played = player.played
    played.streams = player.streams()
    read = {characteristic for characteristic, _, _ in played.streams}
    played.unread = [c.name for c in plan.characteristics if c.name not in read]
    played.seconds = perf_counter() - started
    return played


class _Player:
    def __init__(self, plan: Plan, alerts: IO[bytes] | None, points: IO[bytes] | None) -> None:
        self._plan = plan
        self._engine = Engine(plan, points=points is not None)
        self.played = Played(self._engine.counts)
        self._before: dict[tuple[str, str], int] = {}
        self._compared = False
        self._alerts = alerts
        self._points = points
        self._table = PointsTable()
        if points is not None:
            points.write(HEADER)

    def streams(self) -> list[tuple[str, str, int]]:
        """Every stream there is: characteristic, stream, subgroups played."""
        numbers = self._numbers()
        return sorted((*key, number - self._before.get(key, 0)) for key, number in numbers.items())

    def _numbers(self) -> dict[tuple[str, str], int]:
        return {
            (each.plan.name, stream_names.name(each.stream)): each.last.number if each.last else 0
            for each in self._engine.streams()
        }

    def unreadable(self, recording: Recording, number: int, wrong: str) -> None:
        played = self.played
        played.unreadable += 1
        if len(played.unreadable_at) < _EXAMPLES:
            played.unreadable_at.append(f"{recording.path}:{number}: {wrong}")

    def play(self, chunk: Chunk) -> None:
        played, fold = self.played, self._engine.fold
        last, entries = played.last, 0
        for number, entry in enumerate(chunk.entries, chunk.first):
            if type(entry) is not Parsed:  # by far the most frequent, and never any of these
                if entry is None:
                    continue
                if isinstance(entry, State):
                    self._resume(entry, chunk.recording, number)
                    fold = self._engine.fold
                    continue
                if isinstance(entry, Configured):
                    entry = self._ours(entry, chunk.recording, number)
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

    def _ours(self, configured: Configured, recording: Recording, number: int) -> Configured:
        """Another configuration than ours counts only as something that was heard then."""
        self._compare(configured.plan, recording, number, "")
        return Configured(configured.time, pinned(self._plan, configured.plan))

    def _resume(self, state: State, recording: Recording, number: int) -> None:
        """Go on from what was remembered; what we judge otherwise starts afresh."""
        played, where = self.played, f"{recording.path}:{number}"
        if played.first is not None:
            played.notes.append(f"{where}: a state that is passed over, as it is not the beginning")
            return
        engine = self._engine = Engine(state.plan, points=self._points is not None)
        try:
            # Counted is what is played.
            engine.restore({**state.engine, "counts": asdict(Counts())}, state.streams)
        except (ValueError, KeyError, TypeError) as error:
            raise CommandError(
                f"{where}: a state that this version cannot read: export the journal again"
            ) from error
        played.counts = engine.counts
        self._before = self._numbers()
        ours = pinned(self._plan, state.plan)
        if state.plan != ours:
            self._compare(
                state.plan, recording, number, ", and what it judges otherwise starts afresh"
            )
            outputs = engine.fold(Configured(state.time, ours))
            self._take(outputs, recording, number)

    def _compare(self, theirs: Plan, recording: Recording, number: int, afresh: str) -> None:
        ours = pinned(self._plan, theirs).characteristics
        other = [each.name for each in theirs.characteristics if each not in ours]
        if other and not self._compared:
            self._compared = True
            self.played.notes.append(
                f"{recording.path}:{number}: recorded under another configuration of "
                f"{', '.join(other)}: CONFIG is used instead{afresh}"
            )

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
            stream = stream_names.name(alert.stream)
            key = alert.characteristic.name, stream, event["detector"], event["rule"]
            self.played.raised[key] += 1

    def _note_backwards(self, time: int, recording: Recording, number: int) -> None:
        played = self.played
        if played.first is None or time < played.first:
            played.first = time
        played.backwards += 1
        played.backwards_at = played.backwards_at or f"{recording.path}:{number}"
