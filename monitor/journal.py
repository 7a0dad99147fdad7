"""The journal: the daemon's durable, ordered log of entries, and alerts that wait for the broker.

Knows SQLite and the entries' types. Must not know what entries mean or how alerts are decided.
"""

from __future__ import annotations

import fcntl
import os
import sqlite3
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path

from monitor.entries import Connected, Disconnected, Message, Recorded, Started, Tick

SCHEMA = 1

_TABLES = """
CREATE TABLE meta (name TEXT PRIMARY KEY, value TEXT NOT NULL) WITHOUT ROWID;
CREATE TABLE topics (id INTEGER PRIMARY KEY, topic TEXT NOT NULL UNIQUE);
CREATE TABLE entries (
    position INTEGER PRIMARY KEY,
    time INTEGER NOT NULL,   -- arrival, microseconds since 1970
    kind INTEGER NOT NULL,   -- 0 message, 1 started, 2 connected, 3 disconnected, 4 tick
    topic INTEGER,
    payload BLOB,
    flags INTEGER            -- message: QoS, plus 4 where retained; connected: session present
);
CREATE TABLE outbox (position INTEGER PRIMARY KEY, topic TEXT NOT NULL, payload BLOB NOT NULL);
"""

_MESSAGE, _STARTED, _CONNECTED, _DISCONNECTED, _TICK = range(5)
_RETAINED = 4

_MOST_TOPICS = 20_000  # remembered; whoever may publish may invent topics

_Row = tuple[int, int, int | None, bytes | None, int]


class JournalError(Exception):
    """The journal cannot be used; the text says which file and what to do."""


class Journal:
    """The journal of one daemon, which holds it alone.

    One transaction a batch: entries and the alerts they caused become durable together, or not at
    all.
    """

    def __init__(self, path: Path) -> None:
        self._gone: list[int] = []
        self._topics: dict[str, int] = {}
        self._lock = _locked(path)
        try:
            self._db = sqlite3.connect(path, isolation_level=None)
            _prepare(self._db, path)
            self._outbox = _single(self._db, "SELECT coalesce(max(position), 0) FROM outbox")
            self.last_time = _single(self._db, "SELECT coalesce(max(time), 0) FROM entries")
        except sqlite3.Error as error:
            os.close(self._lock)
            raise JournalError(f"cannot use the journal {path}: {error}") from error
        except JournalError:
            os.close(self._lock)
            raise

    @property
    def unsettled(self) -> bool:
        """Whether an alert was delivered that a crash would make us send again."""
        return bool(self._gone)

    def commit(self, entries: Sequence[Recorded], alerts: Sequence[tuple[str, bytes]]) -> list[int]:
        """Make entries and (topic, payload) alerts durable; the alerts' places in the outbox.

        Raises sqlite3.Error where the disk will not take them; then nothing was written.
        """
        db = self._db
        db.execute("BEGIN IMMEDIATE")
        try:
            db.executemany(
                "INSERT INTO entries (time, kind, topic, payload, flags) VALUES (?, ?, ?, ?, ?)",
                self._rows(entries),
            )
            places = list(range(self._outbox + 1, self._outbox + 1 + len(alerts)))
            db.executemany(
                "INSERT INTO outbox (position, topic, payload) VALUES (?, ?, ?)",
                [(place, *alert) for place, alert in zip(places, alerts, strict=True)],
            )
            db.executemany("DELETE FROM outbox WHERE position = ?", [(n,) for n in self._gone])
            db.execute("COMMIT")
        except BaseException:
            self._topics.clear()  # some are not in the file
            if db.in_transaction:
                db.execute("ROLLBACK")
            raise
        self._outbox += len(alerts)
        self._gone.clear()
        return places

    def delivered(self, place: int) -> None:
        """The broker has acknowledged this alert; it leaves the outbox with the next commit."""
        self._gone.append(place)

    def waiting(self) -> list[tuple[int, str, bytes]]:
        """(place, topic, payload) of the alerts that no broker has acknowledged, oldest first."""
        return self._db.execute(
            "SELECT position, topic, payload FROM outbox ORDER BY position"
        ).fetchall()

    def entries(self) -> Iterator[Recorded]:
        """All entries, oldest first."""
        return read_entries(self._db)

    def close(self) -> None:
        """Let go of the file, once what the broker acknowledged is noted."""
        if self._gone:
            self.commit((), ())
        self._db.close()
        os.close(self._lock)

    def _rows(self, entries: Iterable[Recorded]) -> Iterator[_Row]:
        topics = self._topics
        for entry in entries:
            match entry:
                case Message(time, topic, payload, retain, qos):
                    number = topics.get(topic)
                    if number is None:
                        number = self._topic(topic)
                    yield time, _MESSAGE, number, payload, qos | (_RETAINED if retain else 0)
                case Started(time):
                    yield time, _STARTED, None, None, 0
                case Connected(time, session_present):
                    yield time, _CONNECTED, None, None, int(session_present)
                case Disconnected(time):
                    yield time, _DISCONNECTED, None, None, 0
                case Tick(time):
                    yield time, _TICK, None, None, 0

    def _topic(self, topic: str) -> int:
        self._db.execute("INSERT OR IGNORE INTO topics (topic) VALUES (?)", (topic,))
        number = _single(self._db, "SELECT id FROM topics WHERE topic = ?", topic)
        if len(self._topics) >= _MOST_TOPICS:
            self._topics.clear()
        self._topics[topic] = number
        return number


def open_reader(path: Path) -> sqlite3.Connection:
    """The journal for reading, also while a daemon writes it; raises JournalError."""
    if not path.is_file():
        raise JournalError(f"there is no journal at {path}")
    try:
        uri = f"{path.absolute().as_uri()}?mode=ro"
        db = sqlite3.connect(uri, uri=True, isolation_level=None)
        _check_schema(db, path)
    except sqlite3.Error as error:
        raise JournalError(f"cannot read the journal {path}: {error}") from error
    return db


def read_entries(db: sqlite3.Connection) -> Iterator[Recorded]:
    """All entries of an open journal, oldest first."""
    cursor = db.execute(
        "SELECT e.time, e.kind, t.topic, e.payload, e.flags FROM entries e"
        " LEFT JOIN topics t ON t.id = e.topic ORDER BY e.position"
    )
    for time, kind, topic, payload, flags in cursor:
        if kind == _MESSAGE:
            yield Message(time, topic, payload, flags >= _RETAINED, flags % _RETAINED)
        elif kind == _STARTED:
            yield Started(time)
        elif kind == _CONNECTED:
            yield Connected(time, bool(flags))
        elif kind == _DISCONNECTED:
            yield Disconnected(time)
        else:
            yield Tick(time)


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
    if _single(db, "SELECT count(*) FROM sqlite_master") == 0:
        db.executescript(f"BEGIN;{_TABLES}INSERT INTO meta VALUES ('schema', '{SCHEMA}');COMMIT;")
    _check_schema(db, path)


def _check_schema(db: sqlite3.Connection, path: Path) -> None:
    found = db.execute("SELECT value FROM meta WHERE name = 'schema'").fetchone()
    if found is None or found[0] != str(SCHEMA):
        raise JournalError(
            f"the journal {path} was written by another version: "
            "use that version, or give this one a new file"
        )


def _single(db: sqlite3.Connection, query: str, *values: object) -> int:
    result: int = db.execute(query, values).fetchone()[0]
    return result
