"""After a start the engine is as if it had not ended: from a snapshot, a base or the beginning."""

from __future__ import annotations

import random
import sqlite3
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import orjson
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import GAUGE, START, characteristic, message, shewhart

from monitor import journal, keeper, recovery
from monitor.engine import Engine
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Message,
    Recorded,
    Started,
    Tick,
)
from monitor.folding import Folded
from monitor.journal import AlertRow, Batch, Journal, JournalError
from monitor.keeper import Keeper
from monitor.outputs import Alert, Output
from monitor.plan import (
    ByWindow,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    Judgement,
    Plan,
    RetentionPlan,
)
from monitor.recovery import Recovered, owner, recover
from monitor.times import SECOND

HEADS = replace(GAUGE, stream=(("head", ("head",)),))


def edited(plan: CharacteristicPlan, revision: str) -> CharacteristicPlan:
    """The same with another first detector."""
    assert plan.judgement is not None
    first, *rest = plan.judgement.detectors
    detectors = (DetectorPlan(first.name, first.kind, first.scheme, revision), *rest)
    return replace(plan, judgement=Judgement(plan.judgement.baseline, detectors))


WEIGHT = characteristic(shewhart(width=2.0), CusumPlan("individual", 0.5, 3.0), source=HEADS)
TORQUE = characteristic(shewhart(width=2.0), name="torque")
WINDOWED = replace(TORQUE, name="windowed", subgroup=ByWindow(4 * SECOND, 2))
FIRST = Plan((WEIGHT, TORQUE, WINDOWED))
PLANS = (
    FIRST,
    Plan((replace(WEIGHT, title="Another"), TORQUE, WINDOWED)),
    Plan((edited(WEIGHT, "another"), TORQUE, WINDOWED)),
    Plan((TORQUE, WINDOWED)),
    Plan((replace(WEIGHT, source=GAUGE), WINDOWED)),
)


def life(chance: random.Random, length: int) -> list[Recorded]:
    """Readings of three heads, now and then shifted, with all else that may happen."""
    entries: list[Recorded] = [Started(START), Configured(START, FIRST), Connected(START, False)]
    second, number = 0.0, 0
    while len(entries) < length:
        second += chance.choice([0.0, 0.25, 0.5, 1.0, 1.0, 1.0, 3.0])
        at = START + round(second * SECOND)
        what = chance.random()
        if what < 0.03:
            entries += [Disconnected(at), Connected(at + SECOND, chance.random() < 0.5)]
            second += 1
        elif what < 0.05:
            entries += [Started(at), Configured(at, chance.choice(PLANS))]
        elif what < 0.08:
            entries.append(Configured(at, chance.choice(PLANS)))
        elif what < 0.12:
            entries.append(Tick(at))
        elif what < 0.15:
            entries.append(message(b"{", second))
        else:
            number += chance.choice([1, 1, 1, 1, 0, 2])
            mean = 2.0 if number // 20 % 2 else 0.0
            body = {"v": chance.gauss(mean, 1.0), "t": START / SECOND + second, "n": number}
            entries.append(message({**body, "head": chance.randrange(3)}, second))
    return entries


def memory(engine: Engine) -> Any:
    """All that an engine remembers, and under which plan."""
    streams = sorted((owner(each), each.state()) for each in engine.streams())
    return orjson.loads(orjson.dumps([engine.state(), streams])), engine.plan


class Kept:
    """A journal whose engine may be lost and recovered between any two batches."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.outputs: list[Output] = []
        self.start()

    def start(self) -> Recovered:
        self.journal = Journal(self.path)
        found = recover(self.journal.db, FIRST, True)
        assert found.whole
        self.engine = found.engine
        self.keeper = Keeper(self.journal, self.engine, RetentionPlan(), found.folded)
        return found

    def take(self, entries: Sequence[Recorded]) -> None:
        outputs = [output for each in entries for output in self.engine.fold(each)]
        alerts = [AlertRow("t", "i", b"{}", b"{}", 0) for o in outputs if isinstance(o, Alert)]
        kept = self.keeper.keep(Folded(entries, (), outputs, alerts), 0, entries[-1].time)
        assert kept is not None
        self.outputs += outputs

    def die(self) -> None:
        self.journal.close()


@pytest.fixture(autouse=True)
def often(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(keeper, "_SNAPSHOT_AFTER", 7)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32))
def test_wherever_it_ends_it_goes_on_as_if_it_had_not(
    tmp_path_factory: pytest.TempPathFactory, seed: int
) -> None:
    chance = random.Random(seed)
    entries = life(chance, 150)
    engine = Engine(FIRST, points=True)
    expected = [output for each in entries for output in engine.fold(each)]
    kept = Kept(tmp_path_factory.mktemp("kept") / "j.db")
    left = list(entries)
    while left:
        batch, left = left[: (n := chance.randint(1, 9))], left[n:]
        kept.take(batch)
        if chance.random() < 0.3:
            if chance.random() < 0.3:
                kept.keeper.settle(0)
            kept.die()
            kept.start()
    assert memory(kept.engine) == memory(engine)
    assert kept.outputs == expected
    kept.die()


def test_most_of_it_is_not_folded_again(tmp_path: Path) -> None:
    kept = Kept(tmp_path / "j.db")
    entries = life(random.Random(1), 200)
    for at in range(0, 200, 4):
        kept.take(entries[at : at + 4])
    kept.die()
    assert kept.start().folded < 8
    kept.keeper.settle(0)
    kept.die()
    found = kept.start()
    assert (found.folded, found.position) == (0, len(entries))


# ── what cannot be read ──────────────────────────────────────────────────────────────────────────


def spoil(path: Path, *tables: str) -> None:
    """As if another version had taken these states down."""
    with sqlite3.connect(path) as db:
        for table in tables:
            db.execute(f"UPDATE {table} SET value = '{{\"version\": 99}}' WHERE owner != '/'")
    db.close()


@pytest.fixture
def lived(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> tuple[Kept, list[Recorded]]:
    """A journal with a base and a later snapshot, and all that is in it."""
    kept, entries = Kept(tmp_path / "j.db"), life(random.Random(3), 159)
    # A head that is never heard of again.
    entries.insert(3, message({"v": 0.0, "t": START / SECOND, "n": 0, "head": 99}))
    for at in range(0, 80, 4):
        kept.take(entries[at : at + 4])
    monkeypatch.setattr(kept.keeper._retention, "_wants_base", True)
    for at in range(80, 160, 4):
        kept.take(entries[at : at + 4])
    kept.die()
    return kept, entries


@pytest.mark.parametrize(
    ("tables", "which"),
    [((), "snapshot"), (("state",), "base"), (("state", "bases"), "beginning")],
)
def test_what_another_version_took_down_is_passed_over(
    lived: tuple[Kept, list[Recorded]], tables: tuple[str, ...], which: str
) -> None:
    kept, entries = lived
    spoil(kept.path, *tables)
    found = kept.start()
    base = journal.base(kept.journal.db, journal.NEWEST).position
    newest = journal.snapshot(kept.journal.db).position
    assert 0 < base < newest
    assert found.position == {"snapshot": newest, "base": base, "beginning": 0}[which]
    assert found.position + found.folded == len(entries)
    reference = Engine(FIRST, points=True)
    for each in entries:
        reference.fold(each)
    assert memory(kept.engine) == memory(reference)
    # The next snapshot is whole again, though most streams have stayed as they are.
    kept.keeper.settle(0)
    kept.die()
    assert kept.start().folded == 0
    assert memory(kept.engine) == memory(reference)


@pytest.mark.parametrize("value", [b"", b"{", b"[]", b"null", b'{"version": 1}', b"\xff"])
@pytest.mark.parametrize("of", ["", "/", "torque"])
def test_nonsense_is_passed_over_too(
    lived: tuple[Kept, list[Recorded]], of: str, value: bytes
) -> None:
    kept, entries = lived
    with sqlite3.connect(kept.path) as db:
        db.execute("UPDATE state SET value = ? WHERE owner = ?", (value, of))
        assert db.total_changes == 1
    db.close()
    found = kept.start()
    assert found.position == journal.base(kept.journal.db, journal.NEWEST).position
    assert found.position + found.folded == len(entries)


def test_an_entry_of_another_version_is_said(lived: tuple[Kept, list[Recorded]]) -> None:
    kept, _ = lived
    found = Journal(kept.path)
    found.commit(Batch([Tick(1)]))
    found.db.execute("UPDATE entries SET kind = 77 WHERE position = ?", (found.position,))
    with pytest.raises(JournalError, match=r"another version: an entry of kind 77"):
        recover(found.db, FIRST, True)


# ── which configuration ──────────────────────────────────────────────────────────────────────────


def test_the_plan_in_force_is_the_journals_not_the_callers(tmp_path: Path) -> None:
    kept = Kept(tmp_path / "j.db")
    kept.take([Started(1), Configured(1, PLANS[3])])
    kept.take([Message(2, "x", b"")])
    assert recover(kept.journal.db, FIRST, True).engine.plan == PLANS[3]
    kept.journal.db.execute("DELETE FROM state")
    kept.journal.db.execute("DELETE FROM bases")
    assert recover(kept.journal.db, FIRST, True).engine.plan == PLANS[3]


def test_a_journal_that_notes_none_is_folded_under_the_callers(tmp_path: Path) -> None:
    found = Journal(tmp_path / "j.db")
    found.commit(Batch([Started(START), *(message({"v": 9.0, "t": 1, "n": n}) for n in (1, 2))]))
    recovered = recover(found.db, Plan((TORQUE,)), True)
    assert recovered.engine.counts.messages == 2
    assert recovered.engine.plan == Plan((TORQUE,))


def test_streams_that_left_are_in_no_snapshot_any_more(tmp_path: Path) -> None:
    kept = Kept(tmp_path / "j.db")
    heads = [message({"v": 0.0, "t": START / SECOND, "n": n, "head": n}) for n in range(3)]
    kept.take([Started(START), Configured(START, FIRST), *heads, *map(Tick, range(9))])
    names = {"weight/0", "weight/1", "weight/2"}
    assert kept.journal.owners() == {"", "/", "torque", "windowed", *names}
    kept.take([Configured(START, PLANS[3])])
    kept.keeper.settle(0)
    assert kept.journal.owners() == {"", "/", "torque", "windowed"}
    kept.die()
    assert kept.start().folded == 0, "the snapshot could not be read"
    assert len(kept.engine.streams()) == 2


def test_only_streams_that_changed_are_taken_down() -> None:
    engine = Engine(FIRST, points=True)
    engine.fold(Connected(START, True))
    for n in range(3):
        engine.fold(message({"v": 0.0, "t": START / SECOND, "n": n, "head": n}))
    assert set(recovery.remembered(engine)) == recovery.owners(engine)
    engine.fold(message({"v": 0.0, "t": START / SECOND + 1, "n": 3, "head": 1}, 1))
    assert {*recovery.remembered(engine)} == {"", "/", "weight/1", "torque", "windowed"}
    engine.fold(message(b"{", 2))
    assert {*recovery.remembered(engine)} == {"", "/"}


def test_told_to_stop_it_does_not_fold_it_all(lived: tuple[Kept, list[Recorded]]) -> None:
    kept, _ = lived
    spoil(kept.path, "state", "bases")
    answers = iter([False, False, True])
    found = recover(Journal(kept.path).db, FIRST, True, lambda: next(answers))
    assert (found.folded, found.whole) == (2, False)
