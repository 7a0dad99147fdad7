"""What becomes durable and when, and what happens while the disk takes nothing."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from plans import START, characteristic, message, shewhart

from monitor import ballast, journal, keeper
from monitor.ballast import Ballast
from monitor.engine import Engine
from monitor.entries import Configured, Recorded, Started, Tick
from monitor.folding import Folded
from monitor.journal import AlertRow, Batch, Journal, read_entries
from monitor.keeper import Keeper
from monitor.outputs import Alert
from monitor.plan import Plan, RetentionPlan
from monitor.recovery import recover
from monitor.times import SECOND

PLAN = Plan((characteristic(shewhart(width=2.0)),))
HOUR = 3_600 * SECOND


@pytest.fixture(autouse=True)
def _at_once(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(keeper, "_RETRY", 0.0)


class Bench:
    """An engine and its keeper."""

    def __init__(self, path: Path) -> None:
        self.journal = Journal(path)
        self.engine = Engine(PLAN, points=False)
        self.keeper = Keeper(self.journal, self.engine, RetentionPlan(), 0)
        self.entries: list[Recorded] = []

    def fold(self, *entries: Recorded) -> Folded:
        folded = Folded(entries, ())
        for index, entry in enumerate(entries):
            for output in self.engine.fold(entry):
                if isinstance(output, Alert):
                    folded.alerts.append(AlertRow("alert", "id", b"{}", b"{}", index))
        self.entries += entries
        return folded

    def keep(self, folded: Folded, now: int = START) -> list[tuple[int, str, bytes]] | None:
        return self.keeper.keep(folded, 0, now)

    def kept(self) -> list[Recorded]:
        return list(read_entries(self.journal.db))


@pytest.fixture
def bench(tmp_path: Path) -> Bench:
    return Bench(tmp_path / "j.db")


def readings(first: int, count: int, value: float = 0.0) -> list[Recorded]:
    return [
        message({"v": value, "t": START / SECOND + n, "n": n}, n)
        for n in range(first, first + count)
    ]


def test_what_was_folded_leaves_when_it_is_durable(bench: Bench) -> None:
    folded = bench.fold(Started(START), *readings(0, 1, 9.0))
    folded.clears.append("gone")
    assert bench.keep(folded) == [(1, "alert", b"{}"), (2, "gone", b"")]
    assert bench.kept() == bench.entries
    assert bench.journal.waiting() == [(1, "alert", b"{}"), (2, "gone", b"")]


def test_nothing_is_written_for_nothing(bench: Bench) -> None:
    bench.keep(bench.fold(Started(START)))
    asked: list[str] = []
    bench.journal.db.set_trace_callback(asked.append)
    assert bench.keep(bench.fold()) == []
    assert not asked
    bench.journal.delivered(1)
    assert bench.keep(bench.fold()) == []
    assert any(each.startswith("COMMIT") for each in asked)


def test_the_log_is_carried_over_between_batches(
    bench: Bench, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(journal, "_CHECKPOINT_AFTER", 1)

    def changes() -> bool:
        before = bench.journal.path.stat().st_mtime_ns
        bench.keeper.tidy()
        return bench.journal.path.stat().st_mtime_ns != before

    bench.keep(bench.fold(Started(START), *readings(0, 50)))
    assert changes()
    assert not changes(), "there was nothing left to do"
    bench.keep(bench.fold(*readings(50, 50)))
    bench.keeper.frozen = "the disk is full"
    assert not changes()
    bench.keeper.frozen = None
    assert changes()


def test_it_is_taken_down_now_and_then(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(keeper, "_SNAPSHOT_AFTER", 10)

    def taken_down() -> int:
        return journal.snapshot(bench.journal.db).position

    bench.keep(bench.fold(Started(START)))
    assert taken_down() == 1, "at once: a start has much to tell"
    bench.keep(bench.fold(*readings(0, 9)))
    assert taken_down() == 1
    bench.keep(bench.fold(*readings(9, 1)))
    assert taken_down() == 11
    bench.keep(bench.fold(Tick(START + HOUR)), START + HOUR - 1)
    assert taken_down() == 11
    bench.keep(bench.fold(Tick(START + HOUR)), START + HOUR)
    assert taken_down() == 13


def test_what_the_broker_has_our_word_for_is_noted(bench: Bench) -> None:
    bench.keeper.keep(bench.fold(*readings(0, 3)), 0, START)
    assert bench.journal.proven == 0
    bench.keeper.keep(bench.fold(*readings(3, 3)), 3, START)
    assert bench.journal.proven == 3
    bench.journal.close()
    again = Bench(bench.journal.path)
    again.keeper.keep(again.fold(*readings(6, 3)), 3, START)
    assert again.journal.proven == 3, "a start forgets it"
    again.keeper.settle(7)
    assert again.journal.proven == 7


# ── the disk takes nothing ───────────────────────────────────────────────────────────────────────


def fill_up(bench: Bench) -> None:
    """Let the file grow no more: SQLite says of it what it says of a full disk."""
    pages = bench.journal.db.execute("PRAGMA page_count").fetchone()[0]
    bench.journal.db.execute(f"PRAGMA max_page_count = {pages}")


def make_room(bench: Bench) -> None:
    bench.journal.db.execute("PRAGMA max_page_count = 1000000")


@pytest.mark.parametrize("after", [1, 10_000], ids=["with-a-snapshot", "without"])
def test_a_batch_waits_until_the_disk_takes_it(
    after: int, bench: Bench, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(keeper, "_SNAPSHOT_AFTER", after)
    bench.keep(bench.fold(Started(START), Configured(START, PLAN), *readings(0, 5)))
    fill_up(bench)
    frozen: Folded | None = None
    for n in range(10_000):
        folded = bench.fold(*readings(5 + n, 1, 9.0 if n == 0 else 0.0))
        if bench.keep(folded) is None:
            frozen = folded
            break
    assert frozen is not None, "it never filled"
    assert bench.keeper.frozen == "the journal cannot be written: database or disk is full"
    for _ in range(3):
        assert bench.keep(frozen) is None
    assert bench.kept() == bench.entries[:-1]
    make_room(bench)
    assert bench.keep(frozen) is not None
    assert bench.keeper.frozen is None
    assert bench.kept() == bench.entries
    bench.keep(bench.fold(*readings(20_000, 2)))
    bench.keeper.settle(0)
    bench.journal.close()
    found = recover(Journal(bench.journal.path).db, PLAN, False)
    assert found.folded == 0
    assert found.engine.state() == bench.engine.state()
    assert [s.state() for s in found.engine.streams()] == [
        s.state() for s in bench.engine.streams()
    ], "what a commit that failed took down was lost"


def test_a_stream_that_left_meanwhile_is_forgotten(bench: Bench) -> None:
    bench.keep(bench.fold(Configured(START, PLAN), *readings(0, 5)))
    bench.keeper.settle(0)
    assert bench.journal.owners() == {"", "/", "weight"}
    fill_up(bench)
    padding = message(bytes(100_000))
    folded = bench.fold(Configured(START, Plan(())), padding)
    assert bench.keep(folded, START + HOUR) is None
    make_room(bench)
    assert bench.keep(folded, START + HOUR) is not None
    assert bench.journal.owners() == {"", "/"}


def test_it_does_not_try_all_the_time(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(keeper, "_RETRY", 1_000.0)
    bench.keep(bench.fold(Started(START)))
    fill_up(bench)
    while bench.keep(folded := bench.fold(*readings(len(bench.entries), 50))) is not None:
        pass
    make_room(bench)
    asked: list[str] = []
    bench.journal.db.set_trace_callback(asked.append)
    assert bench.keep(folded) is None
    assert not asked


def test_stopped_while_it_is_frozen_it_is_as_after_a_crash(bench: Bench) -> None:
    (place,) = [n for n, *_ in bench.keep(bench.fold(*readings(0, 1, 9.0))) or ()]
    durable = journal.snapshot(bench.journal.db)
    fill_up(bench)
    while bench.keep(bench.fold(*readings(len(bench.entries), 50))) is not None:
        pass
    bench.journal.delivered(place)
    bench.keeper.settle(5)
    assert journal.snapshot(bench.journal.db) == durable
    kept = bench.kept()
    bench.journal.close()
    again = Journal(bench.journal.path)
    assert list(read_entries(again.db)) == kept
    assert recover(again.db, PLAN, False).position == durable.position


# ── a real disk ──────────────────────────────────────────────────────────────────────────────────


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A file system of 48 megabytes."""
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=48m", "tmpfs", folder]
    if os.geteuid() or subprocess.run(mount, capture_output=True, check=False).returncode:
        pytest.skip("a small disk takes root, and the right to mount")
    yield folder
    subprocess.run(["umount", "--lazy", folder], check=True)


def fill(path: Path) -> None:
    """A file that leaves no room at all."""
    with path.open("wb", buffering=0) as file:
        size = 1 << 20
        while size:
            try:
                file.write(bytes(size))
            except OSError:
                size //= 2


def test_a_full_disk_and_the_space_held_back(small_disk: Path) -> None:
    bench = Bench(small_disk / "j.db")
    held = small_disk / "j.db.ballast"
    assert held.stat().st_size == ballast.SIZE
    bench.keep(bench.fold(Started(START)))
    fill(small_disk / "filler")
    while bench.keep(folded := bench.fold(*readings(len(bench.entries), 500))) is not None:
        pass
    assert not held.exists(), "what is held back is for this"
    assert bench.keep(folded) is None, "nor is it for going on as before"
    fill(small_disk / "more")  # whoever fills the disk may go on
    assert bench.keep(folded) is None
    (small_disk / "more").unlink()
    (small_disk / "filler").unlink()
    assert bench.keep(folded) is not None
    assert bench.kept() == bench.entries
    assert held.stat().st_size == ballast.SIZE


def test_it_can_be_stopped_on_a_full_disk(small_disk: Path) -> None:
    bench = Bench(small_disk / "j.db")
    ((place, *_),) = bench.keep(bench.fold(*readings(0, 1, 9.0))) or ()
    fill(small_disk / "filler")
    while bench.keep(bench.fold(*readings(len(bench.entries), 500))) is not None:
        pass
    fill(small_disk / "more")
    bench.journal.delivered(place)
    bench.keeper.settle(0)
    bench.journal.close()
    (small_disk / "more").unlink()
    assert [n for n, *_ in Journal(bench.journal.path).waiting()] == [place], "it is sent again"


def test_space_is_held_back_only_where_there_is_enough(small_disk: Path) -> None:
    held = Ballast(small_disk / "j.db")
    path = small_disk / "j.db.ballast"
    (small_disk / "filler").write_bytes(bytes(20 << 20))
    held.take()
    assert not path.exists()
    assert held.has_room()
    (small_disk / "filler").unlink()
    held.take()
    assert path.stat().st_size == ballast.SIZE
    assert path.stat().st_blocks * 512 >= ballast.SIZE, "a file with holes holds nothing back"
    held.take()  # again
    held.let_go()
    held.let_go()
    assert not path.exists()
    fill(small_disk / "filler")
    assert not held.has_room()


def test_space_cannot_be_held_back_where_there_is_no_place(tmp_path: Path) -> None:
    held = Ballast(tmp_path / "nowhere" / "j.db")
    held.take()
    held.let_go()
    assert not held.has_room()


LIMITED = """
import resource, sys
from pathlib import Path
sys.path.insert(0, sys.argv[2])
from test_keeper import Bench, START, Started, readings
from monitor import keeper

keeper._RETRY = 0.0
bench = Bench(Path(sys.argv[1]))
bench.keep(bench.fold(Started(START)))
resource.setrlimit(resource.RLIMIT_FSIZE, (200_000, resource.RLIM_INFINITY))
while bench.keep(folded := bench.fold(*readings(len(bench.entries), 50))) is not None:
    assert len(bench.entries) < 100_000
assert bench.keep(folded) is None
said = bench.keeper.frozen
resource.setrlimit(resource.RLIMIT_FSIZE, (resource.RLIM_INFINITY, resource.RLIM_INFINITY))
assert bench.keep(folded) is not None
assert bench.kept() == bench.entries
print(said)
"""


def test_a_limit_on_the_size_of_files(tmp_path: Path) -> None:
    words = [sys.executable, "-c", LIMITED, tmp_path / "j.db", Path(__file__).parent]
    done = subprocess.run(words, capture_output=True, check=False, timeout=60)
    assert done.returncode == 0, done.stderr.decode()
    assert done.stdout.splitlines()[-1].startswith(b"the journal cannot be written: ")


def test_other_errors_are_not_waited_for(bench: Bench) -> None:
    bench.keep(bench.fold(Started(START)))
    bench.journal.commit(Batch([Started(START)]))
    bench.journal.position -= 1  # as if another had written to our file
    with pytest.raises(journal.sqlite3.IntegrityError):
        bench.keep(bench.fold(Tick(START)))
