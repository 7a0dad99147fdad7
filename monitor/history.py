"""What a journal still tells of the past: the state before an entry, and the entries after it.

Knows which snapshots, bases and entries a journal may hold, while a daemon writes and prunes it.
Must not know what entries mean, or who asks.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Iterator
from itertools import islice
from typing import NamedTuple

import orjson

from monitor import journal, plan_json
from monitor.engine import Engine
from monitor.entries import Recorded, State
from monitor.journal import JournalError, Snapshot
from monitor.plan import Plan
from monitor.recovery import restored

_AT_ONCE = 50  # entries; a long read would keep the daemon's log from beginning anew


class Resumed(NamedTuple):
    """An engine that has folded everything up to the entry at ``position``; 0 for nothing yet."""

    engine: Engine
    position: int


def recorded(
    db: sqlite3.Connection,
    since: int | None = None,
    until: int | None = None,
    folding: Callable[[], None] = lambda: None,
) -> Iterator[State | Recorded]:
    """What arrived from ``since`` on and before ``until`` (µs), oldest first.

    A state comes first where that is not the journal's beginning: what was remembered just before.
    ``folding`` is called for each entry that is only folded into it. Where the journal no longer
    reaches back so far, it is told from the oldest state that is left. JournalError where it cannot
    be read.
    """
    last = _ends(db)[1]
    before = 0 if since is None else position_of(db, since) - 1
    engine, position = resume(db, before)
    start = max(position, min(before, last))
    for _, entry in entries(db, position, start):
        engine.fold(entry)
        folding()
    if start:
        yield taken(engine)
    for _, entry in entries(db, start, last):
        if until is not None and entry.time >= until:
            return
        yield entry


def taken(engine: Engine) -> State:
    """What an engine remembers now; it shares nothing with the engine, which may go on."""
    streams = [each.state() for each in engine.streams()]
    memory, streams = orjson.loads(orjson.dumps([engine.state(), streams]))
    return State(memory["arrival"], engine.plan, memory, tuple(streams))


def resume(db: sqlite3.Connection, before: int, *, points: bool = False) -> Resumed:
    """The newest state not after the entry at ``before``; the oldest that is left where none is.

    JournalError where the journal's beginning is gone and this version can read no state in it.
    """
    for kept in _states_until(db, before):
        if (engine := restored(kept, points)) is not None:
            return Resumed(engine, kept.position)
    if _ends(db)[0] <= 1:
        return Resumed(Engine(Plan(()), points=points), 0)
    for kept in _states_after(db, before):
        if (engine := restored(kept, points)) is not None:
            return Resumed(engine, kept.position)
    raise JournalError(
        "the journal's oldest entries were dropped, and what was remembered of them was taken down "
        "by another version: use that version"
    )


def entries(
    db: sqlite3.Connection, after: int, last: int = journal.NEWEST
) -> Iterator[tuple[int, Recorded]]:
    """(position, entry) after one position and up to another, oldest first.

    JournalError where the daemon drops them faster than they are read, or another version wrote
    them.
    """
    while after < last:
        try:
            some = list(islice(journal.numbered_entries(db, after), min(_AT_ONCE, last - after)))
        except ValueError as error:
            raise JournalError(
                f"the journal holds, past entry {after}, what another version wrote: {error}"
            ) from error
        if not some:
            return
        if some[0][0] != after + 1:
            raise JournalError(
                "the daemon dropped old entries while they were read: ask for a later time"
            )
        yield from some
        after = some[-1][0]


def position_of(db: sqlite3.Connection, time: int) -> int:
    """Of the first entry that arrived at or after ``time``; where none did, one past the newest.

    Arrivals never run backwards, so that halving finds it.
    """
    low, newest = _ends(db)
    high = newest + 1
    while low < high:
        middle = (low + high) // 2
        at = "SELECT time FROM entries WHERE position >= ? ORDER BY position LIMIT 1"
        if db.execute(at, (middle,)).fetchone()[0] < time:
            low = middle + 1
        else:
            high = middle
    return low


def plan_in_force(db: sqlite3.Connection) -> Plan | None:
    """The newest configuration that the journal tells of, where this version can read it."""
    noted = "SELECT payload FROM entries WHERE kind = 5 ORDER BY position DESC LIMIT 1"
    kept = "SELECT value FROM state WHERE owner = '/'"
    found = db.execute(noted).fetchone() or db.execute(kept).fetchone()
    try:
        return None if found is None else plan_json.decode(found[0])
    except ValueError:
        return None


def _ends(db: sqlite3.Connection) -> tuple[int, int]:
    """Positions of the oldest and newest entry; 1 and 0 where there is none."""
    query = "SELECT coalesce(min(position), 1), coalesce(max(position), 0) FROM entries"
    oldest, newest = db.execute(query).fetchone()
    return oldest, newest


def _states_until(db: sqlite3.Connection, last: int) -> Iterator[Snapshot]:
    """Newest first. A base that is being dropped is among them: nobody can restore it."""
    newest = _at_one_moment(journal.snapshot, db)
    if newest.values and newest.position <= last:
        yield newest
    while (kept := _at_one_moment(journal.base, db, last)).position:
        yield kept
        last = kept.position - 1


def _states_after(db: sqlite3.Connection, position: int) -> Iterator[Snapshot]:
    while position := journal.base_after(db, position):
        yield _at_one_moment(journal.base, db, position)
    newest = _at_one_moment(journal.snapshot, db)
    if newest.values:
        yield newest


def _at_one_moment(read: Callable[..., Snapshot], db: sqlite3.Connection, *at: int) -> Snapshot:
    """What the daemon commits meanwhile is not seen: half of one state and half of another.

    The read is over before anyone makes an engine of it, which may take long.
    """
    db.execute("BEGIN")
    try:
        return read(db, *at)
    finally:
        db.execute("ROLLBACK")
