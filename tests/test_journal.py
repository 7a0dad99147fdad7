"""The journal: what goes in comes out, together or not at all."""

from __future__ import annotations

import signal
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor import journal as module
from monitor.entries import Connected, Disconnected, Message, Recorded, Started, Tick
from monitor.journal import Journal, JournalError, open_reader, read_entries

times = st.integers(0, 2**62)
topics = st.text(st.characters(exclude_categories=["Cs"]), max_size=6) | st.sampled_from("abc")
recorded: st.SearchStrategy[Recorded] = st.one_of(
    st.builds(Message, times, topics, st.binary(max_size=20), st.booleans(), st.integers(0, 2)),
    st.builds(Started, times),
    st.builds(Connected, times, st.booleans()),
    st.builds(Disconnected, times),
    st.builds(Tick, times),
)
alerts = st.tuples(topics, st.binary(max_size=20))
batches = st.lists(
    st.tuples(st.lists(recorded, max_size=5), st.lists(alerts, max_size=3)), max_size=4
)


@settings(max_examples=30, deadline=None)
@given(batches)
def test_what_was_committed_is_there_when_it_is_opened_again(
    tmp_path_factory: pytest.TempPathFactory,
    batches: list[tuple[list[Recorded], list[tuple[str, bytes]]]],
) -> None:
    path = tmp_path_factory.mktemp("journal") / "deep" / "er" / "journal.db"
    kept: list[Recorded] = []
    waiting: dict[int, tuple[str, bytes]] = {}
    for entries, said in batches:
        journal = Journal(path)
        assert list(journal.entries()) == kept
        assert journal.waiting() == [(n, *alert) for n, alert in waiting.items()]
        assert journal.last_time == max((e.time for e in kept), default=0)
        places = journal.commit(entries, said)
        assert places == sorted(set(places) - set(waiting)), "no place is taken twice"
        kept += entries
        waiting.update(zip(places, said, strict=True))
        if waiting:
            journal.delivered(min(waiting))
            del waiting[min(waiting)]
            assert journal.unsettled
        journal.close()


def test_a_delivered_alert_leaves_with_the_next_commit(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    one, two = journal.commit([], [("a", b"1"), ("a", b"2")])
    assert not journal.unsettled
    journal.delivered(one)
    assert journal.unsettled
    journal.commit([], [])
    assert not journal.unsettled
    assert journal.waiting() == [(two, "a", b"2")]


def test_a_commit_that_fails_leaves_nothing_behind(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "j.db")
    good = [Message(1, "first", b"1")]
    journal.commit(good, [])
    with pytest.raises(UnicodeEncodeError):  # what no topic can hold
        journal.commit([Message(2, "second", b"2"), Message(3, "\ud800", b"3")], [("a", b"1")])
    assert list(journal.entries()) == good
    assert journal.waiting() == []
    # The topics of the failed one must not be taken for known.
    good += [Message(4, "third", b"4"), Message(5, "second", b"5")]
    journal.commit(good[1:], [])
    assert list(journal.entries()) == good


def test_any_number_of_topics(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "_MOST_TOPICS", 3)
    journal = Journal(tmp_path / "j.db")
    entries = [Message(n, f"topic/{n % 7}", b"") for n in range(50)]
    journal.commit(entries, [])
    assert list(journal.entries()) == entries
    assert len(journal._topics) <= 3


def test_only_one_holds_it(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    journal = Journal(path)
    with pytest.raises(JournalError, match=r"another daemon holds the journal .*j\.db"):
        Journal(path)
    journal.commit([Started(1)], [])
    journal.close()
    Journal(path).close()


def test_is_read_while_it_is_written(tmp_path: Path) -> None:
    path = tmp_path / "50% of #1?.db"
    journal = Journal(path)
    journal.commit([Started(1), Message(2, "a", b"x")], [])
    reader = open_reader(path)
    entries = read_entries(reader)
    assert next(entries) == Started(1)
    journal.commit([Started(3)], [])
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
        db.execute("UPDATE meta SET value = '0'")
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
from monitor.journal import Journal

journal = Journal(Path(sys.argv[1]))
n = 0
while True:
    journal.commit([Message(n, f"t/{n}", b"1"), Message(n, "u", b"2")], [("alert", b"%d" % n)])
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
    times = [e.time for e in journal.entries()]
    assert times == [n for n in range(len(times) // 2) for _ in range(2)]
    assert [int(payload) for _, _, payload in journal.waiting()] == list(range(len(times) // 2))
    assert len(times) // 2 >= said, "what was said to be durable was not"
