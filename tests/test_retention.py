"""What the journal drops, and when: by age, by size, a few rows at once, and only up to a base."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path

import pytest
from plans import START, characteristic, message, shewhart

from monitor import journal, keeper, retention
from monitor.engine import Engine
from monitor.entries import Configured, Message, Recorded, Started
from monitor.folding import Folded
from monitor.journal import AlertRow, Journal, read_entries
from monitor.keeper import Keeper
from monitor.outputs import Alert
from monitor.plan import Plan, RetentionPlan
from monitor.recovery import recover
from monitor.retention import Retention
from monitor.times import SECOND

PLAN = Plan((characteristic(shewhart(width=2.0)),))
FEW = 4


@pytest.fixture(autouse=True)
def _small(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(retention, "_LOOK_EVERY", 0)
    monkeypatch.setattr(retention, "_SHORTEST", 5 * SECOND)
    monkeypatch.setattr(retention, "_FEW", FEW)
    monkeypatch.setattr(retention, "_EACH", FEW // 2)
    monkeypatch.setattr(keeper, "_SNAPSHOT_AFTER", 3)


class Line:
    """A reading a second, taken to a journal in batches."""

    def __init__(self, path: Path, plan: RetentionPlan, padding: int = 0) -> None:
        self.journal = Journal(path)
        self.engine = Engine(PLAN, points=False)
        self.keeper = Keeper(self.journal, self.engine, plan, 0)
        self.padding = "x" * padding
        self.now = START
        self.entries: list[Recorded] = []
        self.alerts = 0
        self.take([Started(START), Configured(START, PLAN)])

    def take(self, entries: list[Recorded]) -> None:
        outputs = [output for each in entries for output in self.engine.fold(each)]
        alerts = [
            AlertRow("t", "i", b"{}", bytes(len(self.padding)), 0)
            for output in outputs
            if isinstance(output, Alert)
        ]
        places = self.keeper.keep(Folded(entries, (), outputs, alerts), 0, self.now)
        assert places is not None
        for place, *_ in places:
            self.journal.delivered(place)
        self.entries += entries
        self.alerts += len(alerts)

    def run(self, seconds: int, batch: int = 1) -> Iterator[None]:
        for at in range(0, seconds, batch):
            batched: list[Recorded] = []
            for n in range(at, at + batch):
                self.now += SECOND
                number = len(self.entries) + n - at
                # Three in ten minutes are far out, so that alerts are raised and return.
                value = 9.0 if number % 60 < 3 else 0.0
                second = (self.now - START) / SECOND
                body = {"v": value, "t": START / SECOND + second, "n": number, "x": self.padding}
                batched.append(message(body, second))
            self.take(batched)
            yield

    def kept(self) -> list[Recorded]:
        return list(read_entries(self.journal.db))

    def check_foldable(self) -> None:
        """From the oldest base that is left everything is as it is."""
        db = self.journal.db
        first = journal.base_after(db, 0)
        kept = self.kept()
        assert kept == self.entries[-len(kept) :]
        assert len(self.entries) - len(kept) < first, "the base's own is there, and all after it"
        db.execute("DELETE FROM state")
        db.execute("DELETE FROM bases WHERE position > ?", (first,))
        found = recover(db, PLAN, False)
        assert found.position == first
        assert found.engine.state() == self.engine.state()
        assert [s.state() for s in found.engine.streams()] == [
            s.state() for s in self.engine.streams()
        ]


def test_by_age(tmp_path: Path) -> None:
    line = Line(tmp_path / "j.db", RetentionPlan(keep=100 * SECOND))
    for _ in line.run(350):
        oldest = line.kept()[0].time
        assert oldest <= max(START, line.now - 100 * SECOND), "dropped before its time"
    spacing, behind = 5, 3 * FEW
    assert line.now - oldest <= (100 + 2 * spacing + behind) * SECOND
    bases = line.journal.db.execute("SELECT count(DISTINCT position) FROM bases").fetchone()[0]
    assert 15 <= bases <= 25
    line.check_foldable()


def test_by_size(tmp_path: Path) -> None:
    most = 400_000
    line = Line(tmp_path / "j.db", RetentionPlan(max_size=most), padding=1_000)
    largest = 0
    for _ in line.run(1_500):
        largest = max(largest, line.journal.used_bytes())
    assert len(line.entries) * 1_000 > 3 * most
    assert most < largest < 1.3 * most
    assert len(line.kept()) * 1_000 > most / 4, "far too much was dropped"
    line.check_foldable()


def test_an_old_journal_goes_a_few_rows_at_a_time(tmp_path: Path) -> None:
    line = Line(tmp_path / "j.db", RetentionPlan(keep=1_000 * SECOND))
    for _ in line.run(300):
        pass
    before = len(line.kept())
    line.now += 2_000 * SECOND
    for _ in line.run(20):
        after = len(line.kept())
        assert before - FEW < after <= before + 1
        before = after
    assert before < 300


def test_rows_are_dropped_in_every_few_commits(tmp_path: Path) -> None:
    line = Line(tmp_path / "j.db", RetentionPlan(keep=100 * SECOND))
    for _ in line.run(200):
        pass
    line.now += 100 * SECOND
    counts = [len(line.kept()) for _ in line.run(8)]
    steps = [after - before for before, after in pairwise(counts)]
    # A base's own entry stays, with all that came after it.
    assert sorted(set(steps)) == [1 - FEW, 1]
    assert steps[:2] in ([1, 1 - FEW], [1 - FEW, 1])


def test_large_batches_drop_more_than_they_bring(tmp_path: Path) -> None:
    line = Line(tmp_path / "j.db", RetentionPlan(keep=100 * SECOND))
    for _ in line.run(2_000, batch=50):
        pass
    assert len(line.kept()) < 100 + 5 * 50


def test_nothing_goes_before_there_is_a_base(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(Retention, "wants_base", lambda self: False)
    line = Line(tmp_path / "j.db", RetentionPlan(keep=SECOND, max_size=1))
    for _ in line.run(100):
        pass
    assert line.kept() == line.entries


def test_a_base_is_made_where_the_size_demands_it(tmp_path: Path) -> None:
    line = Line(tmp_path / "j.db", RetentionPlan())
    first = journal.base_after(line.journal.db, 0)
    for _ in line.run(50):
        pass
    assert journal.base_after(line.journal.db, first) == 0, "none for a day"
    line.keeper._retention.plan = RetentionPlan(max_size=1)
    for _ in line.run(20):
        pass
    assert journal.base_after(line.journal.db, first) > 0


def test_alerts_are_kept_for_a_time_of_their_own(tmp_path: Path) -> None:
    line = Line(tmp_path / "j.db", RetentionPlan(keep=50 * SECOND, keep_alerts=600 * SECOND))

    def oldest() -> int:
        query = "SELECT min(time) FROM alerts"
        return int(line.journal.db.execute(query).fetchone()[0])

    for _ in line.run(1_500):
        assert oldest() <= max(START + 10 * SECOND, line.now - 540 * SECOND)
    assert line.kept()[0].time > line.now - 100 * SECOND
    assert line.now - 600 * SECOND <= oldest()
    count = line.journal.db.execute("SELECT count(*) FROM alerts").fetchone()[0]
    assert 10 < count < line.alerts / 2


def test_it_looks_only_now_and_then(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(retention, "_LOOK_EVERY", 60 * SECOND)
    line = Line(tmp_path / "j.db", RetentionPlan())
    asked: list[str] = []
    line.journal.db.set_trace_callback(asked.append)
    for _ in line.run(180):
        pass
    assert sum("page_count" in each for each in asked) == 3


def test_what_is_left_when_it_stops_is_pruned_later(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    line = Line(path, RetentionPlan(keep=100 * SECOND))
    for _ in line.run(150):
        pass
    line.journal.close()
    again = Journal(path)
    first = again.oldest
    assert first > 1
    pruning = journal.Pruning(first + 6, 0, FEW)
    again.commit(journal.Batch([Message(1, "a", b"")], pruning=pruning))
    assert again.oldest == first + FEW
    assert next(read_entries(again.db)) == line.entries[first + FEW - 1]
