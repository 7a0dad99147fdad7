"""One characteristic's part of what was recorded, from which it is judged as it was in the whole.

Knows what a characteristic reads, and what an engine remembers by characteristic. Must not know
files, or how readings are judged.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Any

from monitor import filters
from monitor.commandline import CommandError
from monitor.entries import Configured, Disconnected, Message, Recorded, Started, State
from monitor.plan import Plan
from monitor.times import format_time


def excerpt(recorded: Iterable[State | Recorded], name: str) -> Iterator[State | Recorded]:
    """What concerns the characteristic of that name: messages on its topics, and all that is no
    message; states and plans without the others."""
    part = _Part(name)
    for entry in recorded:
        yield from part.of(entry)
    yield from part.unsaid()


def having(recorded: Iterable[State | Recorded], name: str) -> Iterator[State | Recorded]:
    """The same as it comes; CommandError where its first plan lacks the characteristic."""
    checked = False
    for entry in recorded:
        if isinstance(entry, Configured | State) and not checked:
            names = [each.name for each in entry.plan.characteristics]
            if name not in names:
                raise CommandError(
                    f"there was no characteristic {name!r} at {format_time(entry.time)}, "
                    f"only {', '.join(names)}"
                )
            checked = True
        yield entry


class _Part:
    """One characteristic; its topics are those of the plan in force."""

    def __init__(self, name: str) -> None:
        self._name = name
        self._plan = Plan(())
        self._reads: dict[str, bool] = {}
        self._left_out: int | None = None

    def of(self, entry: State | Recorded) -> Iterator[State | Recorded]:
        """What stands for an entry."""
        match entry:
            case Message(time, topic):
                reads = self._reads.get(topic)
                if reads is None:
                    reads = self._reads[topic] = self._is_read(topic)
                self._left_out = None if reads else time
                if reads:
                    yield entry
            case State():
                self._configure(entry.plan)
                yield self._part(entry)
            case Configured(time, plan):
                self._configure(plan)
                yield Configured(time, self._plan)
            case Started() | Disconnected():
                yield from self.unsaid()
                yield entry
            case _:
                yield entry

    def unsaid(self) -> Iterator[Recorded]:
        """That something was heard which was left out: time passed until then, and no silence
        accrues after it. Said by an entry that changes nothing."""
        if self._left_out is not None:
            yield Configured(self._left_out, self._plan)
            self._left_out = None

    def _configure(self, plan: Plan) -> None:
        self._plan = Plan(tuple(c for c in plan.characteristics if c.name == self._name))
        self._reads.clear()

    def _is_read(self, topic: str) -> bool:
        return any(filters.overlap(each, topic) for each in self._plan.topics())

    def _part(self, whole: State) -> State:
        engine, name = whole.engine, self._name
        deadlines: dict[str, Any] = engine["deadlines"]
        return State(
            whole.time,
            self._plan,
            {
                **engine,
                "deadlines": {
                    **deadlines,
                    "due": [each for each in deadlines["due"] if each[0] == name],
                },
                "counters": [each for each in engine["counters"] if self._is_read(each[0])],
                "gauges": {key: each for key, each in engine["gauges"].items() if key == name},
            },
            tuple(each for each in whole.streams if each["characteristic"] == name),
        )
