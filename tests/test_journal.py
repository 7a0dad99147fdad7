"""The journal: what goes in comes out, together or not at all."""

from __future__ import annotations

import signal
import sqlite3
import subprocess
import sys
from contextlib import closing
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import GAUGE, characteristic

from monitor import journal as module
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Message,
    Recorded,
    Started,
    Tick,
)
from monitor.journal import (
    AlertRow,
    Batch,
    Journal,
    JournalError,
    Pruning,
    is_in_use,
    open_reader,
    read_entries,
)
from monitor.plan import Plan

times = st.integers(0, 2**62)
topics = st.text(st.characters(exclude_categories=["Cs"]), max_size=6) | st.sampled_from("abc")
recorded: st.SearchStrategy[Recorded] = st.one_of(
    st.builds(
        Message,
        times,
        topics,
        st.binary(max_size=20),
        st.booleans(),
        st.integers(0, 2),
        st.integers(0, 65_535),
    ),
    st.builds(Started, times),
    st.builds(Connected, times, st.booleans()),
    st.builds(Disconnected, times),
    st.builds(Tick, times),
)
payloads = st.binary(max_size=20)
batches = st.lists(
    st.tuples(
        st.lists(recorded, min_size=1, max_size=5),
        st.lists(st.builds(AlertRow, topics, topics, payloads, payloads, st.just(0)), max_size=3),
        st.lists(topics, max_size=2),
    ),
    max_size=4,
)


def alert(topic: str, event: bytes, entry: int = 0) -> AlertRow:
    return AlertRow(topic, "id", event, b"{}", entry)


def entries_of(journal: Journal) -> list[Recorded]:
    return list(read_entries(journal.db))


@settings(max_examples=30, deadline=None)
@given(batches)
def test_what_was_committed_is_there_when_it_is_opened_again(
    tmp_path_factory: pytest.TempPathFactory,
    batches: list[tuple[list[Recorded], list[AlertRow], list[str]]],
) -> None:
    path = tmp_path_factory.mktemp("journal") / "deep" / "er" / "journal.db"
    kept: list[Recorded] = []
    waiting: dict[int, tuple[str, bytes]] = {}
    for entries, said, clears in batches:
        journal = Journal(path)
        assert entries_of(journal) == kept
        assert journal.waiting() == [(n, *each) for n, each in waiting.items()]
        assert journal.last_time == (kept[-1].time if kept else 0)
        assert journal.position == len(kept)
        places = journal.commit(Batch(entries, said, clears=clears))
        assert places == sorted(set(places) - set(waiting)), "no place is taken twice"
        kept += entries
        left = [(each.topic, each.event) for each in said] + [(each, b"") for each in clears]
        waiting.update(zip(places, left, strict=True))
        if waiting:
            journal.delivered(min(waiting))
            del waiting[min(waiting)]
            assert journal.unsettled
        journal.close()


def test_a_delivered_alert_leaves_with_the_next_commit(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    one, two = journal.commit(Batch([Started(1)], [alert("a", b"1"), alert("a", b"2")]))
    assert not journal.unsettled
    journal.delivered(one)
    assert journal.unsettled
    journal.commit(Batch([]))
    assert not journal.unsettled
    assert journal.waiting() == [(two, "a", b"2")]


def test_a_commit_that_fails_leaves_nothing_behind(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    good = [Message(1, "first", b"1")]
    journal.commit(Batch(good))
    with pytest.raises(UnicodeEncodeError):  # what no topic can hold
        journal.commit(
            Batch(
                [Message(2, "second", b"2"), Message(3, "\ud800", b"3")],
                [alert("a", b"1")],
                remembered={"x": b"y"},
                proven=7,
            )
        )
    assert (journal.position, journal.proven, journal.owners()) == (1, 0, set())
    assert entries_of(journal) == good
    assert journal.waiting() == []
    # The topics of the failed one must not be taken for known.
    good += [Message(4, "third", b"4"), Message(5, "second", b"5")]
    journal.commit(Batch(good[1:]))
    assert entries_of(journal) == good


def test_any_number_of_topics(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "_MOST_TOPICS", 3)
    journal = Journal(tmp_path / "j.db")
    entries = [Message(n, f"topic/{n % 7}", b"") for n in range(50)]
    journal.commit(Batch(entries))
    assert entries_of(journal) == entries
    assert len(journal._topics) <= 3


def test_only_one_holds_it(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    journal = Journal(path)
    with pytest.raises(JournalError, match=r"another daemon holds the journal .*j\.db"):
        Journal(path)
    journal.commit(Batch([Started(1)]))
    journal.close()
    Journal(path).close()


def test_is_read_while_it_is_written(tmp_path: Path) -> None:
    path = tmp_path / "50% of #1?.db"
    journal = Journal(path)
    journal.commit(Batch([Started(1), Message(2, "a", b"x")]))
    reader = open_reader(path)
    entries = read_entries(reader)
    assert next(entries) == Started(1)
    journal.commit(Batch([Started(3)]))
    assert list(entries) == [Message(2, "a", b"x")], "as it was when the reading began"
    assert list(read_entries(reader)) == [Started(1), Message(2, "a", b"x"), Started(3)]
    with pytest.raises(sqlite3.OperationalError, match="readonly"):
        reader.execute("DELETE FROM entries")


@pytest.mark.parametrize("end", ["open", "open_reader"])
def test_says_what_is_wrong_with_a_file(tmp_path: Path, end: str) -> None:
    use = Journal if end == "open" else open_reader
    garbage = tmp_path / "garbage.db"
    garbage.write_bytes(b"not a database, but long enough to look at" * 100)
    with pytest.raises(JournalError, match=r"garbage\.db: file is not a database"):
        use(garbage)
    other = tmp_path / "other.db"
    Journal(other).close()
    with sqlite3.connect(other) as db:
        db.execute("UPDATE meta SET value = '99' WHERE name = 'schema'")
    db.close()
    with pytest.raises(JournalError, match=r"other\.db was written by another version"):
        use(other)
    with pytest.raises(JournalError, match=r"another version"):
        use(other)  # and did not keep the lock


def test_says_where_it_cannot_be(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    with pytest.raises(JournalError, match=r"file/j\.db.*folder"):
        Journal(tmp_path / "file" / "j.db")
    with pytest.raises(JournalError, match="unable to open"):
        Journal(tmp_path)
    with pytest.raises(JournalError, match=r"there is no journal at .*none\.db"):
        open_reader(tmp_path / "none.db")


WRITER = """
import sys
from pathlib import Path
from monitor.entries import Message
from monitor.journal import AlertRow, Batch, Journal

journal = Journal(Path(sys.argv[1]))
n = 0
while True:
    alert = AlertRow("alert", "id", b"%d" % n, b"{}", 0)
    journal.commit(Batch([Message(n, f"t/{n}", b"1"), Message(n, "u", b"2")], [alert]))
    print(n, flush=True)
    n += 1
"""


def test_a_killed_writer_leaves_whole_batches(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    command = [sys.executable, "-c", WRITER, str(path)]
    with subprocess.Popen(command, stdout=subprocess.PIPE) as writer:
        assert writer.stdout is not None
        while int(writer.stdout.readline()) < 50:
            pass
        writer.send_signal(signal.SIGKILL)
        said = 50 + len(writer.stdout.read().splitlines())
    journal = Journal(path)
    times = [e.time for e in read_entries(journal.db)]
    assert times == [n for n in range(len(times) // 2) for _ in range(2)]
    assert [int(payload) for _, _, payload in journal.waiting()] == list(range(len(times) // 2))
    assert len(times) // 2 >= said, "what was said to be durable was not"


# ── alerts, memory, what is dropped ──────────────────────────────────────────────────────────────


def test_an_alert_stays_with_its_cause_when_it_has_left(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    journal.commit(Batch([Started(5)]))
    batch = Batch([Tick(6), Message(7, "a", b"1")], [AlertRow("t", "abc", b"{1}", b"{2}", 1)])
    (place,) = journal.commit(batch)
    journal.delivered(place)
    journal.commit(Batch([]))
    assert journal.waiting() == []
    found = journal.db.execute("SELECT at, time, id, event, evidence FROM alerts").fetchall()
    assert found == [(3, 7, "abc", b"{1}", b"{2}")]


def test_a_place_is_never_given_twice(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    given: list[int] = []
    for n in range(3):
        journal = Journal(path)
        given += journal.commit(Batch([Started(n)], [alert("a", b"1")] * 2))
        for place in given:
            journal.delivered(place)
        journal.close()
    assert given == [1, 2, 3, 4, 5, 6]


def test_the_newest_snapshot_is_of_each_owner_the_newest(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    assert module.snapshot(journal.db) == (0, {})
    journal.commit(Batch([Started(1)], remembered={"": b"1", "a": b"1", "b": b"1"}))
    journal.commit(Batch([Started(2)]))
    journal.commit(Batch([Started(3)], remembered={"": b"3", "b": b"3"}, forgotten=["a"]))
    assert module.snapshot(journal.db) == (3, {"": b"3", "b": b"3"})
    assert journal.owners() == {"", "b"}


def test_a_base_stays_as_it_was(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    assert module.base(journal.db, module.NEWEST) == (0, {})
    for n in range(1, 7):
        journal.commit(Batch([Started(n * 10)], remembered={"": b"%d" % n}, base=n % 2 == 0))
    journal.commit(Batch([], remembered={"": b"again"}, base=True))  # of the same position
    assert [module.base(journal.db, at)[0] for at in range(8)] == [0, 0, 2, 2, 4, 4, 6, 6]
    assert module.base(journal.db, 5) == (4, {"": b"4"})
    assert module.base(journal.db, module.NEWEST) == (6, {"": b"again"})
    assert [module.base_after(journal.db, at) for at in range(7)] == [2, 2, 4, 4, 6, 6, 0]
    assert module.bases_between(journal.db, 9) == (0, 60)
    assert module.bases_between(journal.db, 20) == (2, 60)
    assert module.bases_between(journal.db, 59) == (4, 60)


@pytest.mark.parametrize("size", [1, 10, 100])
def test_the_log_is_carried_over_between_commits(tmp_path: Path, size: int) -> None:
    journal = Journal(tmp_path / "j.db")
    log = Path(f"{journal.path}-wal")
    changes, largest = 0, 0
    for _ in range(800):
        before = journal.path.stat().st_mtime_ns
        journal.commit(Batch([Message(1, "a/b", b'{"net":341.6,"head":4}')] * size))
        assert journal.path.stat().st_mtime_ns == before, "a commit did it"
        journal.checkpoint()
        changes += journal.path.stat().st_mtime_ns != before
        largest = max(largest, log.stat().st_size)
    assert 1 < changes < 20
    assert largest < 1.5 * module._CHECKPOINT_AFTER * 4096, "the log does not begin anew"


def test_a_log_that_nobody_carries_over_stays_bounded(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "_MOST_LOGGED", 100)
    journal = Journal(tmp_path / "j.db")
    for n in range(500):
        journal.commit(Batch([Tick(n)]))
    assert Path(f"{journal.path}-wal").stat().st_size < 120 * 4096


def test_whether_it_is_in_use(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    assert not is_in_use(path)
    journal = Journal(path)
    assert is_in_use(path)
    with closing(open_reader(path)) as reader:
        assert list(read_entries(reader)) == []
    journal.close()
    assert not is_in_use(path)
    with closing(open_reader(path)) as reader:
        assert list(read_entries(reader)) == []
    assert not is_in_use(path), "whoever reads is no daemon"


def test_a_few_old_rows_go_with_each_commit(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    state = {"": b"x", "a": b"x", "b": b"x"}
    for n in range(1, 31):
        said = [alert("a", b"%d" % n)]
        journal.commit(Batch([Tick(n)], said, remembered=state, base=n in (4, 9, 20)))
    kept = []
    for _ in range(8):
        journal.commit(Batch([], pruning=Pruning(entries_to=9, alerts_to=5, few=2)))
        kept.append(
            [
                journal.db.execute(
                    f"SELECT coalesce(min(position), 0), count(*) FROM {table}"
                ).fetchone()
                for table in ("entries", "bases", "alerts")
            ]
        )
    assert [rows for rows, *_ in kept] == [
        (3, 28), (5, 26), (7, 24), (9, 22), (9, 22), (9, 22), (9, 22), (9, 22)
    ]  # fmt: skip
    assert [rows for _, rows, _ in kept][:3] == [(4, 7), (9, 6), (9, 6)]
    assert [rows for *_, rows in kept][:4] == [(3, 28), (5, 26), (6, 25), (6, 25)]
    assert len(journal.waiting()) == 30, "what was not delivered is never dropped"
    path = journal.path
    journal.close()
    journal = Journal(path)
    assert (journal.oldest, journal.position) == (9, 30)
    journal.commit(Batch([Tick(31)]))
    assert entries_of(journal) == [Tick(n) for n in range(9, 32)]


def test_alerts_before_a_time(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    assert module.alerts_before(journal.db, 10) == 0
    for n in (10, 20, 30):
        journal.commit(Batch([Tick(n)], [alert("a", b"1")]))
    assert [module.alerts_before(journal.db, at) for at in (10, 11, 20, 21, 31)] == [0, 1, 1, 2, 3]


def test_only_messages_after_the_proof_may_come_again(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    journal.commit(Batch([Message(1, "a", b"1"), Started(2), Message(3, "a", b"3", packet=9)]))
    assert list(journal.unproven()) == [
        (1, Message(1, "a", b"1")),
        (3, Message(3, "a", b"3", packet=9)),
    ]
    journal.commit(Batch([], proven=1))
    assert journal.proven == 1
    assert [at for at, _ in journal.unproven()] == [3]


def test_filters_are_all_that_were_configured(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    assert journal.filters() == frozenset()
    plans = [Plan((characteristic(name=n, source=replace(GAUGE, topic=n)),)) for n in ("a", "b")]
    journal.commit(Batch([Configured(n, plan) for n, plan in enumerate([*plans, plans[0]])]))
    journal.db.execute("INSERT INTO entries VALUES (4, 1, 5, NULL, '{}', 0)")  # who knows whose
    assert journal.filters() == {"a", "b"}


# ── the file ─────────────────────────────────────────────────────────────────────────────────────

SCHEMA_1 = """
CREATE TABLE meta (name TEXT PRIMARY KEY, value TEXT NOT NULL) WITHOUT ROWID;
CREATE TABLE topics (id INTEGER PRIMARY KEY, topic TEXT NOT NULL UNIQUE);
CREATE TABLE entries (
    position INTEGER PRIMARY KEY,
    time INTEGER NOT NULL,
    kind INTEGER NOT NULL,
    topic INTEGER,
    payload BLOB,
    flags INTEGER
);
CREATE TABLE outbox (position INTEGER PRIMARY KEY, topic TEXT NOT NULL, payload BLOB NOT NULL);
INSERT INTO meta VALUES ('schema', '1');
INSERT INTO topics VALUES (1, 'line/a'), (2, 'line/b');
INSERT INTO entries VALUES
    (1, 10, 1, NULL, NULL, 0),
    (2, 11, 2, NULL, NULL, 1),
    (3, 12, 0, 1, x'31', 1),
    (4, 13, 0, 2, x'32', 5),
    (5, 14, 0, 2, x'33', 0),
    (6, 15, 3, NULL, NULL, 0);
INSERT INTO outbox VALUES (7, 'alert/a', x'7b7d'), (9, 'alert/b', x'7b7d');
"""


@pytest.fixture
def old(tmp_path: Path) -> Path:
    """A journal as the first version made it."""
    path = tmp_path / "old.db"
    db = sqlite3.connect(path)
    db.execute("PRAGMA journal_mode = WAL")
    db.executescript(SCHEMA_1)
    db.close()
    return path


def test_a_journal_of_the_first_version_goes_on(old: Path) -> None:
    journal = Journal(old)
    before: list[Recorded] = [
        Started(10),
        Connected(11, True),
        Message(12, "line/a", b"1"),
        Message(13, "line/b", b"2", retain=True),
        Message(14, "line/b", b"3", qos=0),
        Disconnected(15),
    ]
    assert entries_of(journal) == before
    assert journal.waiting() == [(7, "alert/a", b"{}"), (9, "alert/b", b"{}")]
    assert (journal.position, journal.last_time, journal.proven) == (6, 15, 0)
    assert module.snapshot(journal.db) == (0, {})
    (place,) = journal.commit(Batch([Tick(16)], [alert("alert/c", b"{}")], remembered={"": b"1"}))
    assert place == 10
    journal.delivered(7)
    journal.close()
    with sqlite3.connect(old) as db:
        assert module.meta(db, "schema") == module.SCHEMA
    db.close()
    journal = Journal(old)
    assert entries_of(journal) == [*before, Tick(16)]
    assert [place for place, *_ in journal.waiting()] == [9, 10]


def test_a_migration_that_fails_changes_nothing(old: Path) -> None:
    with sqlite3.connect(old) as db:
        db.execute("CREATE TABLE state (what TEXT)")  # in the way
    db.close()
    for _ in range(2):
        with pytest.raises(JournalError, match=r"old\.db.*already exists"):
            Journal(old)
    with sqlite3.connect(old) as db:
        tables = {name for (name,) in db.execute("SELECT name FROM sqlite_master")}
        assert module.meta(db, "schema") == 1
    db.close()
    assert "alerts" not in tables


def test_an_empty_file_is_made_a_journal(tmp_path: Path) -> None:
    (tmp_path / "j.db").touch()
    Journal(tmp_path / "j.db").close()
    (tmp_path / "other.db").touch()
    with sqlite3.connect(tmp_path / "other.db") as db:
        db.execute("CREATE TABLE jars (weight REAL)")
    db.close()
    with pytest.raises(JournalError, match="another version"):
        Journal(tmp_path / "other.db")


def filled(path: Path, count: int) -> None:
    """A journal of so many entries, alerts and a hundred rows of state, with ten bases."""
    journal = Journal(path)
    entries: list[Recorded] = [Message(n, "a", b"1") for n in range(count)]
    state = {str(n): b"x" for n in range(count // 100)}
    said = [AlertRow("t", "id", b"{}", b"{}", n) for n in range(0, count, 10)]
    for place in journal.commit(Batch(entries, said, remembered=state)):
        journal.delivered(place)
    for n in range(10):
        journal.commit(Batch([Started(count + n)], remembered={"0": b"y"}, base=True))
    journal.commit(Batch([Configured(count + 10, Plan(()))], proven=journal.position))
    journal.close()


def test_neither_a_start_nor_a_commit_costs_more_in_a_large_journal(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    steps = 0
    connect = sqlite3.connect

    def counting(*args: Any, **named: Any) -> sqlite3.Connection:
        def step() -> int:
            nonlocal steps
            steps += 1
            return 0

        db = connect(*args, **named)
        db.set_progress_handler(step, 1)  # each instruction of SQLite's virtual machine
        return db

    taken = []
    for count in (1_000, 20_000):
        path = tmp_path / f"{count}.db"
        filled(path, count)
        with monkeypatch.context() as patched:
            patched.setattr(module.sqlite3, "connect", counting)
            steps = 0
            journal = Journal(path)
            assert journal.last_time == count + 10
            assert list(journal.unproven()) == []
            assert journal.filters() == frozenset()
            assert module.bases_between(journal.db, count + 3)[1] == count + 9
            assert module.base_after(journal.db, 1) == count + 1
            assert module.alerts_before(journal.db, 5) == 1
            assert journal.used_bytes() > 0
            assert list(read_entries(journal.db, journal.position - 1)) == [
                Configured(count + 10, Plan(()))
            ]
            pruning = Pruning(count, 0, 10)
            journal.commit(Batch([Started(count + 11)], [alert("a", b"1")], pruning=pruning))
            journal.close()
        taken.append(steps)
    assert taken[0] > 500, "nothing was counted"
    assert taken[1] < 1.2 * taken[0]
