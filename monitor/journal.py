"""The journal: the daemon's durable, ordered log of entries, its alerts, and what it remembered.

Knows SQLite. Must not know what entries mean, how alerts are decided or when to forget.
"""

from __future__ import annotations

import contextlib
import fcntl
import os
import sqlite3
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

from monitor import plan_json, rows
from monitor.entries import Recorded

SCHEMA = 2

_FIRST = """
CREATE TABLE meta (name TEXT PRIMARY KEY, value TEXT NOT NULL) WITHOUT ROWID;
CREATE TABLE topics (id INTEGER PRIMARY KEY, topic TEXT NOT NULL UNIQUE);
CREATE TABLE entries (
    position INTEGER PRIMARY KEY,
    time INTEGER NOT NULL,   -- arrival, microseconds since 1970
    kind INTEGER NOT NULL,   -- see rows.py
    topic INTEGER,
    payload BLOB,
    flags INTEGER
);
CREATE TABLE outbox (position INTEGER PRIMARY KEY, topic TEXT NOT NULL, payload BLOB NOT NULL);
"""

_MIGRATIONS = {
    0: _FIRST,
    1: """
CREATE TABLE alerts (
    position INTEGER PRIMARY KEY,
    at INTEGER NOT NULL,     -- position of the entry that caused it
    time INTEGER NOT NULL,   -- arrival of that entry
    id TEXT NOT NULL,
    event BLOB NOT NULL,
    evidence BLOB NOT NULL
);
CREATE INDEX alerts_by_id ON alerts (id);
CREATE INDEX configurations ON entries (position) WHERE kind = 5;
CREATE TABLE state (owner TEXT PRIMARY KEY, value BLOB NOT NULL) WITHOUT ROWID;
CREATE TABLE bases (
    position INTEGER NOT NULL,
    owner TEXT NOT NULL,
    value BLOB NOT NULL,
    PRIMARY KEY (position, owner)
) WITHOUT ROWID;
""",
}
"""From each schema to the next; each runs in one transaction, on an existing file too."""

NEWEST = 2**62
"""After every position."""

_CHECKPOINT_AFTER = 1_000  # pages in the write-ahead log
_MOST_LOGGED = 4_000  # pages; then a commit carries them over itself, whoever forgets to
_ROWS_A_PAGE = 20  # of readings; at least, or a checkpoint comes a little late
_MOST_UNPROVEN = 70_000  # a little more than packet identifiers can be outstanding
_MOST_TOPICS = 20_000  # remembered; whoever may publish may invent topics


class JournalError(Exception):
    """The journal cannot be used; the text says which file and what to do."""


class AlertRow(NamedTuple):
    """An alert to be published, and what it was decided on."""

    topic: str
    id: str
    event: bytes
    evidence: bytes
    entry: int
    """Index of its cause among the batch's entries."""


class Snapshot(NamedTuple):
    """What was remembered after an entry, by owner."""

    position: int
    values: dict[str, bytes]


class Pruning(NamedTuple):
    """Up to which positions entries and alerts may go, ``few`` rows of each at once."""

    entries_to: int
    alerts_to: int
    few: int


@dataclass(slots=True)
class Batch:
    """What becomes durable together, or not at all. ``clears`` are topics whose retained message is
    to go; they leave through the outbox as alerts do, with nothing in them.

    ``remembered`` goes with all ``entries`` folded; ``base`` keeps a copy of it to fold again from.
    """

    entries: Sequence[Recorded]
    alerts: Sequence[AlertRow] = ()
    remembered: dict[str, bytes] = field(default_factory=dict)
    forgotten: Sequence[str] = ()
    base: bool = False
    proven: int | None = None
    pruning: Pruning | None = None
    clears: Sequence[str] = ()


class Journal:
    """The journal of one daemon, which holds it alone; one transaction a batch."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._gone: list[int] = []
        self._topics: dict[str, int] = {}
        self._logged = 0
        with contextlib.ExitStack() as held:
            held.callback(os.close, _locked(path))
            try:
                self.db = sqlite3.connect(path, isolation_level=None)
                held.callback(self.db.close)
                _prepare(self.db, path)
                self._outbox = max(
                    _single(self.db, f"SELECT coalesce(max(position), 0) FROM {table}")
                    for table in ("outbox", "alerts")
                )
                self.position = _single(self.db, "SELECT coalesce(max(position), 0) FROM entries")
                self.position = max(self.position, meta(self.db, "snapshot"))
                self.oldest = _single(self.db, "SELECT coalesce(min(position), 1) FROM entries")
            except sqlite3.Error as error:
                raise JournalError(f"cannot use the journal {path}: {error}") from error
            self._held = held.pop_all()

    @property
    def proven(self) -> int:
        """The position up to which the broker is known to have our acknowledgements."""
        return meta(self.db, "proven")

    @property
    def unsettled(self) -> bool:
        """Whether an alert was delivered that a crash would make us send again."""
        return bool(self._gone)

    @property
    def last_time(self) -> int:
        """The arrival of the newest entry; 0 where there is none."""
        last = "SELECT time FROM entries ORDER BY position DESC LIMIT 1"
        return _single(self.db, f"SELECT coalesce(({last}), 0)")

    def commit(self, batch: Batch) -> list[int]:
        """Make a batch durable; the alerts' places in the outbox.

        Raises sqlite3.Error where the disk will not take it; then nothing was written.
        """
        db, first = self.db, self.position + 1
        last = self.position + len(batch.entries)
        oldest = self.oldest
        leaving = len(batch.alerts) + len(batch.clears)
        places = list(range(self._outbox + 1, self._outbox + 1 + leaving))
        db.execute("BEGIN IMMEDIATE")
        try:
            db.executemany(
                "INSERT INTO entries (position, time, kind, topic, payload, flags)"
                " VALUES (?, ?, ?, ?, ?, ?)",
                [(n, *row) for n, row in enumerate(rows.rows(batch.entries, self._number), first)],
            )
            for place, alert in zip(places, batch.alerts, strict=False):
                self._write_alert(place, alert, first, batch.entries)
            db.executemany(
                "INSERT INTO outbox (position, topic, payload) VALUES (?, ?, x'')",
                zip(places[len(batch.alerts) :], batch.clears, strict=True),
            )
            db.executemany("DELETE FROM outbox WHERE position = ?", [(n,) for n in self._gone])
            if batch.remembered:
                self._remember(batch, last)
            if batch.proven is not None:
                set_meta(db, "proven", batch.proven)
            if batch.pruning is not None:
                oldest = self._prune(batch.pruning)
            db.execute("COMMIT")
        except BaseException:
            self._topics.clear()  # some are not in the file
            if db.in_transaction:
                db.execute("ROLLBACK")
            raise
        self.position, self.oldest = last, oldest
        self._outbox += leaving
        self._gone.clear()
        dropped = 0 if batch.pruning is None else batch.pruning.few
        # A leaf, its parent and what keeps count of pages are rewritten for a single row, too.
        self._logged += 4 + (len(batch.entries) + dropped) // _ROWS_A_PAGE
        return places

    def checkpoint(self) -> None:
        """Carry what the write-ahead log holds over into the file, once that is much.

        It takes as long as several commits, so it is for between them, when nobody waits for one.
        """
        if self._logged >= _CHECKPOINT_AFTER:
            self._logged = 0
            with contextlib.suppress(sqlite3.OperationalError):  # a full disk: commits will say so
                self.db.execute("PRAGMA wal_checkpoint(PASSIVE)")

    def delivered(self, place: int) -> None:
        """The broker has acknowledged this alert; it leaves the outbox with the next commit."""
        self._gone.append(place)

    def waiting(self) -> list[tuple[int, str, bytes]]:
        """(place, topic, event) of the alerts that no broker has acknowledged, oldest first."""
        return self.db.execute(
            "SELECT position, topic, payload FROM outbox ORDER BY position"
        ).fetchall()

    def unproven(self) -> Iterator[tuple[int, Recorded]]:
        """(position, message) after the last that the broker is known to have our word for."""
        proven = max(self.proven, self.position - _MOST_UNPROVEN)
        return numbered_entries(self.db, after=proven, kind=rows.MESSAGE)

    def filters(self) -> frozenset[str]:
        """Every filter that was configured in the time that entries are kept."""
        found: set[str] = set()
        for (plan,) in self.db.execute("SELECT DISTINCT payload FROM entries WHERE kind = 5"):
            with contextlib.suppress(ValueError):  # of another version
                found |= plan_json.decode(plan).topics()
        return frozenset(found)

    def close(self) -> None:
        """Let go of the file, once what the broker acknowledged is noted."""
        if self._gone:
            with contextlib.suppress(sqlite3.OperationalError):  # then it is sent again
                self.commit(Batch(()))
        self._held.close()

    def _write_alert(
        self, place: int, alert: AlertRow, first: int, entries: Sequence[Recorded]
    ) -> None:
        self.db.execute(
            "INSERT INTO outbox (position, topic, payload) VALUES (?, ?, ?)",
            (place, alert.topic, alert.event),
        )
        self.db.execute(
            "INSERT INTO alerts (position, at, time, id, event, evidence)"
            " VALUES (?, ?, ?, ?, ?, ?)",
            (
                place,
                first + alert.entry,
                entries[alert.entry].time,
                alert.id,
                alert.event,
                alert.evidence,
            ),
        )

    def _remember(self, batch: Batch, position: int) -> None:
        db = self.db
        db.executemany(
            "INSERT OR REPLACE INTO state (owner, value) VALUES (?, ?)", batch.remembered.items()
        )
        db.executemany("DELETE FROM state WHERE owner = ?", [(name,) for name in batch.forgotten])
        set_meta(db, "snapshot", position)
        if batch.base:
            db.execute(
                "INSERT OR REPLACE INTO bases SELECT ?, owner, value FROM state", (position,)
            )

    def owners(self) -> set[str]:
        """Whose memory the newest snapshot holds."""
        return {owner for (owner,) in self.db.execute("SELECT owner FROM state")}

    def used_bytes(self) -> int:
        """How much of the file is in use."""
        pages = _single(self.db, "PRAGMA page_count") - _single(self.db, "PRAGMA freelist_count")
        return pages * _single(self.db, "PRAGMA page_size")

    def _prune(self, pruning: Pruning) -> int:
        """Drop a few old rows; the position of the oldest entry left."""
        db, oldest = self.db, self.oldest
        # The base's own entry stays: it tells the base's age.
        until = min(oldest + pruning.few - 1, pruning.entries_to - 1)
        if until >= oldest:
            db.execute("DELETE FROM entries WHERE position <= ?", (until,))
            oldest = until + 1
            db.execute(
                "DELETE FROM bases WHERE (position, owner) IN"
                " (SELECT position, owner FROM bases WHERE position < ? LIMIT ?)",
                (pruning.entries_to, pruning.few),
            )
        if pruning.alerts_to:
            db.execute(
                "DELETE FROM alerts WHERE position IN"
                " (SELECT position FROM alerts WHERE position <= ? ORDER BY position LIMIT ?)",
                (pruning.alerts_to, pruning.few),
            )
        return oldest

    def _number(self, topic: str) -> int:
        number = self._topics.get(topic)
        if number is None:
            self.db.execute("INSERT OR IGNORE INTO topics (topic) VALUES (?)", (topic,))
            number = _single(self.db, "SELECT id FROM topics WHERE topic = ?", topic)
            if len(self._topics) >= _MOST_TOPICS:
                self._topics.clear()
            self._topics[topic] = number
        return number


def is_in_use(path: Path) -> bool:
    """Whether a daemon writes the journal, or was killed while it did."""
    # Whoever writes it takes the log away at the end; whoever reads it may leave an empty one. To
    # try the lock instead would stop a daemon that starts at that moment.
    try:
        return Path(f"{path}-wal").stat().st_size > 0
    except OSError:
        return False


def open_reader(path: Path) -> sqlite3.Connection:
    """The journal for reading, also while a daemon writes it; raises JournalError."""
    if not path.is_file():
        raise JournalError(f"there is no journal at {path}")
    try:
        uri = f"{path.absolute().as_uri()}?mode=ro"
        db = sqlite3.connect(uri, uri=True, isolation_level=None)
        found = _schema(db)
    except sqlite3.Error as error:
        raise JournalError(f"cannot read the journal {path}: {error}") from error
    if found != SCHEMA:
        raise JournalError(_other_version(path))
    return db


def snapshot(db: sqlite3.Connection) -> Snapshot:
    """The newest snapshot; position 0 and nothing where there is none."""
    values = dict(db.execute("SELECT owner, value FROM state"))
    return Snapshot(meta(db, "snapshot") if values else 0, values)


def base(db: sqlite3.Connection, at: int) -> Snapshot:
    """The newest base not after a position; position 0 and nothing where there is none."""
    query = "SELECT coalesce(max(position), 0) FROM bases WHERE position <= ?"
    position = _single(db, query, at)
    found = db.execute("SELECT owner, value FROM bases WHERE position = ?", (position,))
    return Snapshot(position, dict(found))


def bases_between(db: sqlite3.Connection, time: int) -> tuple[int, int]:
    """(position of the newest base that old or older, time of the newest base); 0 for none."""
    # From each base to the next: there may be thousands of rows between.
    found = db.execute(
        "WITH RECURSIVE places (position) AS (SELECT min(position) FROM bases UNION ALL"
        " SELECT (SELECT min(b.position) FROM bases b WHERE b.position > places.position)"
        " FROM places WHERE position IS NOT NULL)"
        " SELECT position, time FROM places JOIN entries USING (position) ORDER BY position"
    ).fetchall()
    old = [position for position, at in found if at <= time]
    return (old[-1] if old else 0), (found[-1][1] if found else 0)


def base_after(db: sqlite3.Connection, position: int) -> int:
    """The first base after a position; 0 for none."""
    query = "SELECT coalesce(min(position), 0) FROM bases WHERE position > ?"
    return _single(db, query, position)


def alerts_before(db: sqlite3.Connection, time: int) -> int:
    """The position of the last alert older than a time; 0 for none."""
    # Found from the oldest on, and few are older: those that are go soon.
    young = "SELECT position - 1 FROM alerts WHERE time >= ? ORDER BY position LIMIT 1"
    return _single(db, f"SELECT coalesce(({young}), (SELECT max(position) FROM alerts), 0)", time)


def read_entries(db: sqlite3.Connection, after: int = 0) -> Iterator[Recorded]:
    """The entries of an open journal after a position, oldest first."""
    return (each for _, each in numbered_entries(db, after))


def numbered_entries(
    db: sqlite3.Connection, after: int = 0, kind: int | None = None
) -> Iterator[tuple[int, Recorded]]:
    """The same with their positions; of one kind where that is given.

    ValueError where one was written by another version.
    """
    cursor = db.execute(
        "SELECT e.position, e.time, e.kind, t.topic, e.payload, e.flags FROM entries e"
        " LEFT JOIN topics t ON t.id = e.topic WHERE e.position > ? AND e.kind = ifnull(?, e.kind)"
        " ORDER BY e.position",
        (after, kind),
    )
    for position, *row in cursor:
        yield position, rows.entry(*row)


def meta(db: sqlite3.Connection, name: str) -> int:
    """A number that is noted under ``name``; 0 where none is."""
    return _single(db, "SELECT coalesce((SELECT value FROM meta WHERE name = ?), 0)", name)


def set_meta(db: sqlite3.Connection, name: str, value: int) -> None:
    """Note a number under ``name``."""
    db.execute("INSERT OR REPLACE INTO meta (name, value) VALUES (?, ?)", (name, str(value)))


def _locked(path: Path) -> int:
    """The open file whose lock says that the journal is ours."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        lock = os.open(f"{path}.lock", os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o644)
    except OSError as error:
        why = "Not a directory" if isinstance(error, FileExistsError) else error.strerror
        raise JournalError(
            f"cannot make the journal {path}: {why}; "
            "give journal.path a folder that can be written to"
        ) from error
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        os.close(lock)
        raise JournalError(
            f"another daemon holds the journal {path}: stop it, or give this one its own"
        ) from error
    return lock


def _prepare(db: sqlite3.Connection, path: Path) -> None:
    db.execute("PRAGMA journal_mode = WAL")
    db.execute("PRAGMA synchronous = FULL")
    db.execute(f"PRAGMA wal_autocheckpoint = {_MOST_LOGGED}")
    found = _schema(db)
    if found is None or found > SCHEMA:
        raise JournalError(_other_version(path))
    for step in range(found, SCHEMA):
        db.executescript(
            f"BEGIN;{_MIGRATIONS[step]}"
            f"INSERT OR REPLACE INTO meta VALUES ('schema', '{step + 1}');COMMIT;"
        )


def _schema(db: sqlite3.Connection) -> int | None:
    """The schema's number, 0 for an empty file, None where it is not ours."""
    if _single(db, "SELECT count(*) FROM sqlite_master") == 0:
        return 0
    if _single(db, "SELECT count(*) FROM sqlite_master WHERE name = 'meta'") == 0:
        return None
    return meta(db, "schema") or None


def _other_version(path: Path) -> str:
    return (
        f"the journal {path} was written by another version: "
        "use that version, or give this one a new file"
    )


def _single(db: sqlite3.Connection, query: str, *values: object) -> int:
    return int(db.execute(query, values).fetchone()[0])
