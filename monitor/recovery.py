"""What the engine remembers, taken down for the journal and brought back from it.

Knows snapshots, their owners and what to fall back on. Must not know files, or what is remembered.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import orjson

from monitor import journal, messages, plan_json
from monitor.engine import Engine
from monitor.entries import Recorded
from monitor.journal import JournalError
from monitor.plan import Plan
from monitor.stream import StreamState

_ENGINE, _PLAN = "", "/"  # no stream's path is empty or begins with a slash


@dataclass(frozen=True, slots=True)
class Recovered:
    """An engine that has folded ``folded`` entries after the one at ``position``: all that its
    journal holds, unless it is not ``whole`` because we were told to stop."""

    engine: Engine
    position: int
    folded: int
    whole: bool


def owner(state: StreamState) -> str:
    """The name that a stream's memory is kept under."""
    return messages.path(state.plan.name, state.stream)


def owners(engine: Engine) -> set[str]:
    """Whose memory a snapshot of this engine holds."""
    return {_ENGINE, _PLAN, *(owner(state) for state in engine.streams())}


def remembered(engine: Engine) -> dict[str, bytes]:
    """What changed since this was last asked, by owner; the streams that did not stay as they are.

    Empties ``engine.changed``.
    """
    values = {owner(state): orjson.dumps(state.state()) for state in engine.changed}
    engine.changed.clear()
    values[_ENGINE] = orjson.dumps(engine.state())
    values[_PLAN] = plan_json.encode(engine.plan)
    return values


def restored(kept: journal.Snapshot, points: bool) -> Engine | None:
    """The engine that a snapshot was taken of; None where this version cannot read it."""
    try:
        plan = plan_json.decode(kept.values[_PLAN])
        engine = Engine(plan, points=points)
        streams = [
            orjson.loads(value)
            for name, value in kept.values.items()
            if name not in (_ENGINE, _PLAN)
        ]
        engine.restore(orjson.loads(kept.values[_ENGINE]), streams)
    except (ValueError, LookupError, TypeError, AttributeError):
        return None
    return engine


def recover(
    db: sqlite3.Connection,
    plan: Plan,
    points: bool,
    stopping: Callable[[], bool] = lambda: False,
) -> Recovered:
    """The newest snapshot with the entries after it folded in.

    A snapshot of another version is passed over for the last base, a base for the journal's start,
    under the configuration in force there, or ``plan`` where none is noted. JournalError where an
    entry is of another version.
    """
    newest = journal.snapshot(db)
    for kept in (newest, journal.base(db, journal.NEWEST)):
        engine = restored(kept, points) if kept.values else None
        if engine is not None:
            break
    else:
        kept = journal.Snapshot(0, {})
        engine = Engine(plan, points=points)
    folded, whole = 0, True
    for entry in _readable(journal.read_entries(db, kept.position)):
        if stopping():
            whole = False
            break
        engine.fold(entry)
        folded += 1
    if kept is not newest:
        # What the unreadable snapshot holds of streams that stayed as they are is to go, too.
        engine.changed.update(dict.fromkeys(engine.streams()))
    return Recovered(engine, kept.position, folded, whole)


def _readable(entries: Iterator[Recorded]) -> Iterator[Recorded]:
    try:
        yield from entries
    except ValueError as error:
        raise JournalError(
            f"the journal was written by another version: {error}; "
            "use that version, or give this one a new file"
        ) from error
