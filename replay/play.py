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
from monitor.plan import CharacteristicPlan, Plan, Stream
from monitor.stream import Counts, StreamState
from monitor.stream_learning import StreamLearning
from monitor.subgroups import Subgroup
from replay.merging import in_order
from replay.points import HEADER, PointsTable
from replay.recordings import Chunk, Recording
from replay.tables import FIRST_ROW, Layout

OnProgress = Callable[[Chunk], None]
"""Told what has just been played, every few hundred lines."""

KEPT = 20
"""Alert events kept for showing; the files have them all."""

_EXAMPLES = 5


@dataclass(frozen=True, slots=True)
class PlayedStream:
    """One stream that had a reading: of its ``subgroups``, how many were ``judged``; ``why`` it is
    not judged at the end, None where it is; ``adopted``: event time (µs) from which on it is judged
    by a baseline that it learned during this play."""

    characteristic: str
    stream: str
    subgroups: int
    judged: int
    why: str | None
    adopted: int | None


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
    streams: list[PlayedStream] = field(default_factory=list)
    """By characteristic and stream."""
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
    read = {each.characteristic for each in played.streams}
    played.unread = [c.name for c in plan.characteristics if c.name not in read]
    played.seconds = perf_counter() - started
    return played


class _Player:
    def __init__(self, plan: Plan, alerts: IO[bytes] | None, points: IO[bytes] | None) -> None:
        self._plan = plan
        self._adoptions: dict[tuple[str, str], tuple[int, int]] = {}
        self._engine = Engine(plan, points=points is not None, opened=self._watch)
        self.played = Played(self._engine.counts)
        self._before: dict[tuple[str, str], int] = {}
        self._compared = False
        self._alerts = alerts
        self._points = points
        self._table = PointsTable()
        if points is not None:
            points.write(HEADER)

    def streams(self) -> list[PlayedStream]:
        """Every stream there is."""
        found = [self._stream(_key(each), each) for each in self._engine.streams()]
        return sorted(found, key=lambda each: (each.characteristic, each.stream))

    def _stream(self, key: tuple[str, str], state: StreamState) -> PlayedStream:
        number, before = _number(state), self._before.get(key, 0)
        why, adopted = None, self._adoptions.get(key)
        first_judged = before if adopted is None else adopted[0]
        if state.judgement is None:
            first_judged = number
            why = _why(state.learning)
        return PlayedStream(
            *key,
            number - before,
            number - first_judged,
            why,
            None if adopted is None else adopted[1],
        )

    def _watch(self, state: StreamState) -> None:
        """Only the stream itself knows when it adopts what it learned."""
        if state.plan.learn is not None:
            state.learning = _Watched(state, self._adoptions)

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
        engine = self._engine = Engine(
            state.plan, points=self._points is not None, opened=self._watch
        )
        try:
            # Counted is what is played.
            engine.restore({**state.engine, "counts": asdict(Counts())}, state.streams)
        except (ValueError, KeyError, TypeError) as error:
            raise CommandError(
                f"{where}: a state that this version cannot read: export the journal again"
            ) from error
        played.counts = engine.counts
        self._before = {_key(each): _number(each) for each in engine.streams()}
        ours = pinned(self._plan, state.plan)
        if state.plan != ours:
            self._compare(
                state.plan, recording, number, ", and what it judges otherwise starts afresh"
            )
            outputs = engine.fold(Configured(state.time, ours))
            self._take(outputs, recording, number)
        for each in engine.streams():  # which have been opened before
            remembered = each.learning.state()
            self._watch(each)
            each.learning.restore(remembered)

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


def _key(state: StreamState) -> tuple[str, str]:
    return state.plan.name, stream_names.name(state.stream)


def _why(learning: StreamLearning) -> str:
    """Why a stream is not judged."""
    told, proposal = learning.told or "no baseline", learning.proposal
    if proposal is None or proposal["verdict"] == "trust":
        return told
    # Otherwise one would wait for what does not come.
    verdict = "refused" if proposal["verdict"] == "refuse" else "only provisional"
    return f"{told}; what it learned last was {verdict}"


def _number(state: StreamState) -> int:
    return state.last.number if state.last else 0


class _Watched(StreamLearning):
    """Learns as any, and notes the subgroup and the event time at which a baseline was adopted."""

    __slots__ = ("_adoptions", "_key")

    def __init__(
        self, state: StreamState, adoptions: dict[tuple[str, str], tuple[int, int]]
    ) -> None:
        super().__init__(state.plan.learn)
        self._key, self._adoptions = _key(state), adoptions

    def take(self, plan: CharacteristicPlan, stream: Stream, subgroup: Subgroup) -> bool:
        """Gather a subgroup; whether another baseline was adopted by it."""
        adopted = super().take(plan, stream, subgroup)
        if adopted:
            self._adoptions[self._key] = subgroup.number, subgroup.last
        return adopted
