"""The readings of recordings as arrays: those the engine itself accepts, stream by stream.

Knows how to look over the engine's shoulder. Must not know how readings are accepted (that is the
engine's own business), nor what will be made of them.
"""

from __future__ import annotations

import hashlib
import itertools
import os
from array import array
from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from monitor.commandline import CommandError
from monitor.engine import Engine
from monitor.entries import Configured, Parsed, State
from monitor.outputs import Output, SetAside
from monitor.plan import ByCount, ByWindow, CharacteristicPlan, Plan, Stream
from monitor.stream import Counts, StreamState
from monitor.subgroups import Gatherer, Identity, Subgroup
from replay.merging import in_order
from replay.recordings import Chunk, Recording
from replay.tables import FIRST_ROW, Layout

Times = NDArray[np.int64]
Values = NDArray[np.float64]
Places = NDArray[np.int64]

OnProgress = Callable[[Chunk], None]
"""Told what has just been read, every few hundred lines."""

_EXAMPLES = 5


@dataclass(frozen=True, slots=True)
class StreamReadings:
    """The readings of one stream, in the order in which the engine took them.

    ``time``: event times in µs since 1970-01-01T00:00Z, never falling; ``value``: in the gauge's
    unit; both of one length. ``breaks``: rising indices of readings that do not continue the one
    before, since the gauge restarted between them: no subgroup spans one, and a window that was
    open is given up. (A restart after a window's end, before it was seen to be over, gives it up;
    after that it is no break.)
    """

    stream: Stream
    time: Times
    value: Values
    breaks: Places


@dataclass(frozen=True, slots=True)
class Readings:
    """The readings of one characteristic; ``streams`` in the order of their values.

    ``set_aside``: how many messages or rows of it were set aside, by reason.
    """

    plan: CharacteristicPlan
    streams: tuple[StreamReadings, ...]
    set_aside: dict[str, int]

    @property
    def count(self) -> int:
        """Readings of all streams."""
        return sum(len(each.value) for each in self.streams)

    @property
    def first(self) -> int | None:
        """The earliest event time (µs); None without a reading."""
        return min((int(s.time[0]) for s in self.streams), default=None)

    @property
    def last(self) -> int | None:
        """The latest event time (µs); None without a reading."""
        return max((int(s.time[-1]) for s in self.streams), default=None)


@dataclass(frozen=True, slots=True)
class Gathered:
    """What recordings held: readings by characteristic, in the plan's order.

    ``entries``: lines or rows that could be read; ``unreadable``: those that could not, the first
    few in words in ``unreadable_at``. ``unclaimed``: messages of no characteristic, by reason;
    ``set_aside_at``: the first of each reason, file and line, and what it was. ``notes``: what else
    is to be known of the recordings.
    """

    readings: dict[str, Readings]
    entries: int
    unreadable: int
    unreadable_at: tuple[str, ...]
    unclaimed: dict[str, int]
    set_aside_at: dict[str, tuple[str, SetAside]]
    notes: tuple[str, ...]


def gather(
    plan: Plan,
    recordings: Sequence[Recording],
    layout: Layout,
    interval: int,
    progress: OnProgress,
) -> Gathered:
    """The readings of every characteristic of ``plan``, from recordings taken as one stream in
    order of arrival; detectors and baselines are not looked at.

    ``layout`` and ``interval`` (µs) as ``replay.play.play`` takes them. Raises CommandError where a
    recording cannot be read.
    """
    reader = _Reader(plan)
    clock = itertools.count(FIRST_ROW, interval)
    opened = [recording.open(layout, clock, reader.unreadable) for recording in recordings]
    for chunk in in_order(opened):
        reader.read(chunk)
        progress(chunk)
    return reader.gathered()


def sha256(path: str) -> str:
    """The SHA-256 of a recording's file, in 64 hexadecimal digits.

    Raises CommandError where it is no file that can be read twice.
    """
    if not os.path.isfile(path):
        raise CommandError(f"{path} is no regular file, so what was read of it cannot be named")
    try:
        with open(path, "rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError as error:
        raise CommandError(f"cannot read {path}: {error.strerror}") from error


class _Reader:
    def __init__(self, plan: Plan) -> None:
        # Unjudged, readings cost less; how they are accepted depends on the source alone, and on
        # windows, whose end makes what comes after it late.
        self._plan = Plan(
            tuple(
                replace(
                    each,
                    judgement=None,
                    by_stream={},
                    learn=None,
                    subgroup=each.subgroup if isinstance(each.subgroup, ByWindow) else ByCount(1),
                )
                for each in plan.characteristics
            )
        )
        self._asked = plan
        self._engine = Engine(self._plan, points=False, opened=_record)
        self._set_aside: dict[str, dict[str, int]] = {c.name: {} for c in plan.characteristics}
        self._unclaimed: dict[str, int] = {}
        self._set_aside_at: dict[str, tuple[str, SetAside]] = {}
        self._entries = 0
        self._unreadable = 0
        self._unreadable_at: list[str] = []
        self._notes: list[str] = []

    def unreadable(self, recording: Recording, number: int, wrong: str) -> None:
        self._unreadable += 1
        if len(self._unreadable_at) < _EXAMPLES:
            self._unreadable_at.append(f"{recording.path}:{number}: {wrong}")

    def read(self, chunk: Chunk) -> None:
        fold = self._engine.fold
        for number, entry in enumerate(chunk.entries, chunk.first):
            if type(entry) is not Parsed:
                if entry is None:
                    continue
                if isinstance(entry, State):
                    self._resume(entry, f"{chunk.recording.path}:{number}")
                    fold = self._engine.fold
                    continue
                if isinstance(entry, Configured):
                    entry = Configured(entry.time, self._plan)
            self._entries += 1
            outputs = fold(entry)
            if outputs:
                self._take(outputs, chunk.recording, number)

    def _resume(self, state: State, where: str) -> None:
        """Accept what follows as the engine of then would have; what it had gathered unfinished
        has no times, and is left out."""
        if self._entries:
            self._notes.append(f"{where}: a state that is passed over, as it is not the beginning")
            return
        engine = Engine(state.plan, points=False, opened=_record)
        try:
            engine.restore({**state.engine, "counts": asdict(Counts())}, state.streams)
        except (ValueError, KeyError, TypeError) as error:
            raise CommandError(
                f"{where}: a state that this version cannot read: export the journal again"
            ) from error
        engine.fold(Configured(state.time, self._plan))
        for stream in engine.streams():
            _record(stream)
        self._engine = engine

    def _take(self, outputs: Iterable[Output], recording: Recording, number: int) -> None:
        for output in outputs:
            if type(output) is SetAside:
                reason, name = output.reason, output.characteristic
                counts = self._unclaimed if name is None else self._set_aside.get(name, {})
                counts[reason] = counts.get(reason, 0) + 1
                if reason not in self._set_aside_at:
                    self._set_aside_at[reason] = f"{recording.path}:{number}", output

    def gathered(self) -> Gathered:
        found: dict[str, list[StreamReadings]] = {c.name: [] for c in self._plan.characteristics}
        for state in sorted(self._engine.streams(), key=lambda each: each.keys):
            recorder = state.gatherer
            if isinstance(recorder, _Recorder) and recorder.times:
                found[state.plan.name].append(recorder.readings(state.stream))
        return Gathered(
            {
                each.name: Readings(each, tuple(found[each.name]), self._set_aside[each.name])
                for each in self._asked.characteristics
            },
            self._entries,
            self._unreadable,
            tuple(self._unreadable_at),
            self._unclaimed,
            self._set_aside_at,
            tuple(self._notes),
        )


def _record(state: StreamState) -> None:
    # Only a window has an end of its own, which the engine must still be told.
    state.gatherer = _WindowRecorder(state.gatherer) if state.windowed else _Recorder()


class _Recorder:
    """Stands where a stream's gatherer does, and keeps every reading instead of grouping them."""

    # What ``monitor.quick`` looks at before it leaves a reading to ``add``.
    __slots__ = (
        "_keep_time",
        "_keep_value",
        "_values",
        "breaks",
        "last",
        "number",
        "times",
        "values",
    )

    def __init__(self) -> None:
        self.number = 0
        self.values: tuple[float, ...] = ()
        self.last: int | None = None
        self.times = array("q")
        self._values = array("d")
        self.breaks = array("q")
        self._keep_time, self._keep_value = self.times.append, self._values.append

    def add(self, value: float, time: int, identity: Identity) -> Subgroup | None:
        """Keep it."""
        self._keep_time(time)
        self._keep_value(value)
        return None

    def closes(self) -> int | None:
        """Only readings end what counts readings."""
        return None

    def close(self) -> Subgroup | None:
        """Only readings end what counts readings."""
        return None

    def abandon(self) -> None:
        """What comes does not continue what was."""
        at = len(self.times)
        if at and (not self.breaks or self.breaks[-1] != at):
            self.breaks.append(at)

    def state(self) -> list[Any]:
        """Nothing that another engine could go on from."""
        raise NotImplementedError

    def restore(self, state: Sequence[Any]) -> None:
        """Nothing that another engine could go on from."""
        raise NotImplementedError

    def readings(self, stream: Stream) -> StreamReadings:
        """All that was kept."""
        return StreamReadings(
            stream,
            np.frombuffer(self.times, np.int64),
            np.frombuffer(self._values, np.float64),
            np.array([at for at in self.breaks if at < len(self.times)], np.int64),
        )


class _WindowRecorder(_Recorder):
    """Keeps every reading, and lets the windows open and close beside that."""

    __slots__ = ("_windows",)

    def __init__(self, windows: Gatherer) -> None:
        super().__init__()
        self._windows = windows

    def add(self, value: float, time: int, identity: Identity) -> Subgroup | None:
        """Keep it; a window that it ends is nobody's."""
        self._windows.add(value, time, identity)
        return super().add(value, time, identity)

    def closes(self) -> int | None:
        """The end of the window that is open."""
        return self._windows.closes()

    def close(self) -> Subgroup | None:
        """The window has ended."""
        self._windows.close()
        return None

    def abandon(self) -> None:
        """What comes does not continue what was; of windows, only an open one is lost."""
        if self._windows.closes() is not None:
            super().abandon()
        self._windows.abandon()
