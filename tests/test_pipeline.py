"""From what came in to what is durable, without a broker."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
import yaml
from daemons import CONFIGURATION, weighing

from monitor.configuration.resolve import read_settings
from monitor.engine import Engine
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Message,
    Recorded,
    Started,
)
from monitor.folding import Folded
from monitor.health import Health
from monitor.journal import Batch, Journal, read_entries
from monitor.outputs import Alert, Gone
from monitor.pipeline import Pipeline
from monitor.plan import ByWindow, CusumPlan, DetectorPlan, Intent, Plan, Settings
from monitor.publisher import Publisher
from monitor.recovery import recover
from monitor.times import SECOND

START = 1_772_433_672 * SECOND


@pytest.fixture
def settings(tmp_path: Path) -> Settings:
    config = tmp_path / "driftbell.yaml"
    config.write_text(yaml.safe_dump({**CONFIGURATION, "broker": {"host": "localhost"}}))
    return read_settings(config, {})


class Line:
    """A pipeline that is fed by hand."""

    def __init__(self, settings: Settings) -> None:
        self.settings = settings
        self.start()

    def start(self) -> None:
        pipeline = self.pipeline = Pipeline(self.settings, lambda: False)
        self.publisher = Publisher(self.settings.root, pipeline.engine, Health(), pipeline.outbox)
        pipeline.configure(self.settings.plan)
        pipeline.connecting()
        pipeline.subscribed(session_present=True)

    def come(self, number: int, net: float = 340.0, packet: int = 0) -> None:
        topic, payload = weighing(number, START + number * SECOND, net)
        self.pipeline.intake.message(topic, payload, False, 1, packet or number, False)

    def step(self) -> Folded:
        return self.pipeline.step(self.publisher)

    def journaled(self) -> list[Recorded]:
        journal = self.pipeline._journal
        return list(read_entries(journal.db))


def test_acknowledged_is_what_is_durable(settings: Settings) -> None:
    line = Line(settings)
    for n in (1, 2):
        line.come(n, 350.0)
    assert len(line.pipeline.outbox) == 0
    folded = line.step()
    assert folded.acknowledge == [1, 2]
    assert [type(entry) for entry in line.journaled()] == [
        Started,
        Configured,
        Connected,
        Message,
        Message,
    ]
    assert sum(isinstance(output, Alert) for output in folded.outputs) == len(folded.alerts) == 1
    assert len(line.pipeline.outbox) == 1
    assert line.step().acknowledge == []


def test_frozen_it_gives_nothing_and_later_all(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    line = Line(settings)
    line.step()
    monkeypatch.setattr("monitor.keeper._RETRY", 0.0)
    db = line.pipeline._journal.db
    db.execute(f"PRAGMA max_page_count = {db.execute('PRAGMA page_count').fetchone()[0]}")
    number = 0
    while line.pipeline.frozen is None:
        for _ in range(20):
            number += 1
            line.come(number, 350.0)
        folded = line.step()
    assert (folded.acknowledge, folded.outputs, folded.entries) == ((), [], ())
    line.come(number + 1)
    assert line.step().acknowledge == ()
    db.execute("PRAGMA max_page_count = 100000")
    assert line.step().acknowledge == list(range(number - 19, number + 1))
    assert line.step().acknowledge == [number + 1]
    assert line.pipeline.frozen is None
    assert sum(isinstance(entry, Message) for entry in line.journaled()) == number + 1
    assert line.pipeline.engine.counts.readings == number + 1


def test_while_it_is_frozen_no_window_is_waited_for(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    windowed = tuple(
        replace(each, subgroup=ByWindow(10 * SECOND)) for each in settings.plan.characteristics
    )
    line = Line(replace(settings, plan=Plan(windowed)))
    line.come(1)
    line.step()
    assert line.pipeline.seconds_to_next() < 60
    monkeypatch.setattr(line.pipeline._keeper, "frozen", "it is full")
    assert line.pipeline.seconds_to_next() == float("inf"), "it would be asked all the time"


def test_what_is_journaled_after_a_proof_is_not_proven(settings: Settings) -> None:
    line = Line(settings)
    line.come(1)
    line.step()
    line.pipeline.resends.proof(packet=7, position=line.pipeline.position)
    line.come(2)
    line.step()
    line.come(3)
    line.step()
    line.pipeline.taken(7)
    assert [each.packet for _, each in line.pipeline.resends._unproven] == [2, 3]


def test_what_was_frozen_when_the_connection_ended_is_recognised(
    settings: Settings, monkeypatch: pytest.MonkeyPatch
) -> None:
    line = Line(settings)
    line.step()
    monkeypatch.setattr("monitor.keeper._RETRY", 0.0)
    db = line.pipeline._journal.db
    db.execute(f"PRAGMA max_page_count = {db.execute('PRAGMA page_count').fetchone()[0]}")
    number = 0
    while line.pipeline.frozen is None:
        for _ in range(20):
            number += 1
            line.come(number)
        line.step()
    line.come(number + 1)  # it dies with its connection
    line.pipeline.connection_lost(was_online=True)
    line.pipeline.connecting()
    db.execute("PRAGMA max_page_count = 100000")
    assert line.step().acknowledge == (), "on this connection nothing has come yet"
    topic = weighing(1, START, 340.0)[0]
    for n in range(number - 9, number + 2):
        _, payload = weighing(n, START + n * SECOND, 340.0)
        line.pipeline.intake.message(topic, payload, False, 1, n, True)
    assert line.step().acknowledge == list(range(number - 9, number + 2))
    assert line.pipeline.engine.counts.set_aside == {}, "told by its place, before it is read"
    assert sum(isinstance(entry, Message) for entry in line.journaled()) == number + 1
    assert sum(isinstance(entry, Disconnected) for entry in line.journaled()) == 1


def test_a_session_that_is_gone_sends_nothing_again(settings: Settings) -> None:
    line = Line(settings)
    line.come(1)
    line.step()
    line.pipeline.connection_lost(was_online=True)
    line.pipeline.connecting()
    line.pipeline.subscribed(session_present=False)
    line.come(1, packet=9)
    line.step()
    assert line.pipeline.engine.counts.set_aside == {"repeated": 1}, "so it was taken for new"
    assert line.pipeline.engine.counts.alerts == 2, "session-lost, of each characteristic"


def test_told_to_stop_while_it_reads_it_forgets_nothing(settings: Settings) -> None:
    journal = Journal(Path(settings.journal))
    entries: list[Recorded] = [Started(START), Configured(START, settings.plan)]
    for n in range(1, 40):
        net = 340.0 if n % 7 else 350.0
        entries.append(Message(START, *weighing(n, START + n * SECOND, net)))
    journal.commit(Batch(entries))
    journal.close()
    answers = iter([False] * 10 + [True])
    stopped = Pipeline(settings, lambda: next(answers))
    stopped.configure(settings.plan)
    stopped.close()
    journal = Journal(Path(settings.journal))
    reference = Engine(settings.plan, points=False)
    for each in entries:
        reference.fold(each)
    found = recover(journal.db, settings.plan, False)
    assert found.folded == len(entries)
    assert found.engine.state() == reference.state()


def test_after_a_clean_stop_nothing_is_folded_and_nothing_expected(settings: Settings) -> None:
    line = Line(settings)
    for n in range(1, 5):
        line.come(n)
    line.step()
    line.pipeline.resends.proof(packet=7, position=line.pipeline.position)  # the last words
    line.pipeline.taken(7)
    line.pipeline.close()
    journal = Journal(Path(settings.journal))
    assert recover(journal.db, settings.plan, False).folded == 0
    assert list(journal.unproven()) == []
    journal.close()
    line.start()
    assert not line.pipeline.resends.matching


def test_filters_of_all_times_are_known(settings: Settings) -> None:
    line = Line(settings)
    assert line.pipeline.filters == settings.plan.topics(), "those of the plan, at first"
    line.step()
    line.pipeline.close()
    bare = Settings(
        Plan(()),
        settings.broker,
        settings.root,
        settings.points,
        settings.journal,
    )
    for _ in range(2):
        line = Line(bare)
        folded = line.step()
        assert not any(isinstance(output, Gone) for output in folded.outputs)
        assert line.pipeline.filters == settings.plan.topics()
        line.pipeline.close()


def solved_differently(settings: Settings, by: float) -> Settings:
    """The same configuration, as a version that solves constants a little otherwise has it."""
    (weight,) = [each for each in settings.plan.characteristics if each.name == "net-weight"]
    assert weight.judgement is not None
    intent = Intent("cusum", "individual", 1e6, 1, catch=2.0)
    cusum = DetectorPlan("cusum", "cusum", CusumPlan("individual", 0.5, 12.657 + by), "r", intent)
    judgement = replace(weight.judgement, detectors=(cusum,))
    return replace(settings, plan=Plan((replace(weight, judgement=judgement),)))


def limit(line: Line) -> float:
    (weight,) = line.pipeline.engine.plan.characteristics
    assert weight.judgement is not None
    scheme = weight.judgement.detectors[0].scheme
    assert isinstance(scheme, CusumPlan)
    return scheme.h


def test_what_was_worked_out_once_stays_over_a_restart(settings: Settings) -> None:
    line = Line(solved_differently(settings, 0.0))
    line.come(1)
    line.step()
    line.pipeline.close()
    line.settings = solved_differently(settings, 0.01)
    line.start()
    line.come(2)
    line.step()
    assert limit(line) == 12.657
    line.pipeline.close()
