"""What a journal tells of the past: from any moment on, the same alerts as there were."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from pathlib import Path

import journals
import plans
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor import history, recovery
from monitor.engine import Engine
from monitor.entries import Recorded, State, Tick
from monitor.history import entries, position_of, recorded
from monitor.journal import Batch, Journal, JournalError, Snapshot, open_reader
from monitor.plan import Plan

DAY = journals.day(seed=1)
BASES = (100, 230)


@pytest.fixture(scope="module")
def journal(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return journals.write(tmp_path_factory.mktemp("whole") / "j.db", DAY, BASES)


def stretch(
    path: Path, since: int | None = None, until: int | None = None
) -> tuple[State | None, list[Recorded]]:
    with closing(open_reader(path)) as db:
        found = list(recorded(db, since, until))
    state = found.pop(0) if found and isinstance(found[0], State) else None
    assert state is None or isinstance(state, State)
    return state, [each for each in found if not isinstance(each, State)]


def test_the_whole_has_no_state(journal: Path) -> None:
    assert stretch(journal) == (None, DAY)


@pytest.mark.parametrize("after", [*range(1, len(DAY), 7), *BASES, BASES[0] - 1, len(DAY)])
def test_what_follows_a_state_is_told_as_it_was(journal: Path, after: int) -> None:
    since = DAY[after].time if after < len(DAY) else DAY[-1].time + 1
    state, rest = stretch(journal, since)
    assert rest == DAY[after:]
    assert state is not None
    assert state.time == max(each.time for each in DAY[:after])
    whole = Engine(Plan(()), points=False)
    journals.told(whole, DAY[:after])
    assert journals.told(journals.resumed(state), rest) == journals.told(whole, rest)


def test_the_stretches_hold_alerts_that_began_before_them() -> None:
    # Else the test above would prove little.
    events = plans.events(plans.fold(Engine(Plan(()), points=False), DAY))
    assert {each["characteristic"] for each in events} == {"weight", "glue", "torque"}
    assert {"raised", "returned-to-normal", "rejoined"} <= {each["event"] for each in events}


def test_stretches_meet_without_a_gap(journal: Path) -> None:
    at = DAY[150].time
    _, first = stretch(journal, None, at)
    _, second = stretch(journal, at, None)
    assert first + second == DAY
    assert stretch(journal, DAY[10].time, DAY[20].time)[1] == DAY[10:20]
    assert stretch(journal, 0) == (None, DAY)


@pytest.mark.parametrize("dropped", [BASES[0] - 1, BASES[0] - 60])
def test_a_pruned_journal_begins_with_its_oldest_state(tmp_path: Path, dropped: int) -> None:
    path = journals.write(tmp_path / "j.db", DAY, BASES, dropped=dropped)
    whole = Engine(Plan(()), points=False)
    journals.told(whole, DAY[: BASES[0]])
    expected = journals.told(whole, DAY[BASES[0] :])
    for since in (None, 0, DAY[dropped + 1].time):
        state, rest = stretch(path, since)
        assert rest == DAY[BASES[0] :]
        assert state is not None
        assert journals.told(journals.resumed(state), rest) == expected


def test_a_base_that_is_being_dropped_is_passed_over(tmp_path: Path) -> None:
    path = journals.write(tmp_path / "j.db", DAY, BASES, dropped=BASES[0] - 1)
    with closing(sqlite3.connect(path)) as db, db:
        # As the daemon drops it: a few rows with each commit, in the order of the key.
        db.execute(
            "DELETE FROM bases WHERE (position, owner) IN (SELECT position, owner FROM bases"
            " WHERE position < ? LIMIT 1)",
            (BASES[1],),
        )
    state, rest = stretch(path)
    assert state is not None
    assert rest == DAY[BASES[1] :]


def test_without_any_state_that_can_be_read_it_says_so(tmp_path: Path) -> None:
    path = journals.write(tmp_path / "j.db", DAY, BASES, dropped=BASES[0] - 1)
    with closing(sqlite3.connect(path)) as db, db:
        for table in ("bases", "state"):
            db.execute(f"UPDATE {table} SET value = '{{\"version\":0}}' WHERE owner = ''")
    with pytest.raises(JournalError, match="taken down by another version"):
        stretch(path)


def test_an_empty_journal_has_nothing_to_tell(tmp_path: Path) -> None:
    Journal(tmp_path / "j.db").close()
    assert stretch(tmp_path / "j.db") == stretch(tmp_path / "j.db", 5) == (None, [])


def test_says_when_entries_are_dropped_while_they_are_read(
    journal: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(history, "_AT_ONCE", 10)
    path = journals.write(tmp_path / "j.db", DAY)
    with closing(open_reader(path)) as db, closing(sqlite3.connect(path)) as daemon:
        reading = entries(db, 0)
        next(reading)
        with daemon:
            daemon.execute("DELETE FROM entries WHERE position <= 50")
        with pytest.raises(JournalError, match="dropped old entries while they were read"):
            list(reading)


@pytest.mark.parametrize("since", [None, DAY[240].time, DAY[60].time])
@pytest.mark.parametrize("dropped", [0, BASES[0] - 1])
def test_the_daemon_can_begin_its_log_anew_whatever_is_read(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, since: int | None, dropped: int
) -> None:
    path = journals.write(tmp_path / "j.db", DAY, BASES, dropped=dropped)
    with closing(open_reader(path)) as db, closing(Journal(path)) as daemon:
        restoring = calls = 0

        def now_and_then() -> None:
            nonlocal calls
            calls += 1
            if calls % 13 == 0:
                begins_anew()

        def begins_anew() -> None:
            daemon.commit(Batch([Tick(DAY[-1].time)]))
            busy, left, _ = daemon.db.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()
            assert (busy, left) == (0, 0), "a read goes on"

        def restored(kept: Snapshot, points: bool) -> Engine | None:
            nonlocal restoring
            restoring += 1
            begins_anew()
            return recovery.restored(kept, points)

        monkeypatch.setattr(history, "restored", restored)
        monkeypatch.setattr(history, "_AT_ONCE", 7)
        told = []
        for entry in recorded(db, since, folding=now_and_then):
            now_and_then()
            told.append(entry)
    assert restoring == (1 if dropped or since == DAY[240].time else 0)
    rest = [each for each in told if not isinstance(each, State)]
    assert rest == DAY[-len(rest) :]
    assert calls >= len(rest) > 50


@settings(max_examples=50, deadline=None)
@given(
    arrivals=st.lists(st.integers(0, 12), max_size=12).map(sorted),
    dropped=st.integers(0, 5),
    asked=st.integers(-1, 13),
)
def test_the_position_of_a_moment(
    tmp_path_factory: pytest.TempPathFactory, arrivals: list[int], dropped: int, asked: int
) -> None:
    path = tmp_path_factory.mktemp("j") / "j.db"
    journals.write(path, [Tick(each) for each in arrivals], dropped=min(dropped, len(arrivals)))
    left = [(n, each) for n, each in enumerate(arrivals, 1) if n > dropped]
    with closing(open_reader(path)) as db:
        found = position_of(db, asked)
    if left:
        assert found == next((n for n, each in left if each >= asked), left[-1][0] + 1)
    else:
        assert found == 1
