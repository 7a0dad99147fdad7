"""From a real daemon's journal: a stretch that begins with an alert open rings as it did live."""

from __future__ import annotations

import contextlib
import json
from pathlib import Path
from typing import Any

import pytest
from brokers import Broker, Client
from daemons import Launched, driftbell, replayed, started, until, weighings

from monitor.entries import Message
from monitor.journal import NEWEST, open_reader
from monitor.times import format_time


@pytest.fixture
def stopped(broker: Broker, tmp_path: Path) -> Launched:
    """A daemon that watched two lanes for a while, was started again, and has stopped."""
    sent = weighings(4_000, seed=5)
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as line:
        line.publish_all(sent[:1_500])
        until(lambda: daemon.count() == 1_500, "the first messages", daemon.is_running)
        daemon.stop()
        daemon.start()
        line.publish_all(sent[1_500:])
        until(lambda: daemon.count() == len(sent), "all messages", daemon.is_running)
        daemon.stop()
        return daemon


def live(daemon: Launched, after: int, until: int = NEWEST) -> list[dict[str, Any]]:
    """The alert events that entries after one position and up to another caused."""
    query = "SELECT event FROM alerts WHERE at > ? AND at <= ? ORDER BY position"
    with contextlib.closing(open_reader(daemon.journal)) as db:
        return [json.loads(event) for (event,) in db.execute(query, (after, until))]


def open_after(events: list[dict[str, Any]]) -> set[str]:
    """The alerts that are open when these events are over."""
    found: set[str] = set()
    for event in events:
        if event["event"] in ("raised", "rejoined"):
            found.add(event["id"])
        elif event["event"] != "updated":
            found.discard(event["id"])
    return found


def test_a_stretch_rings_as_it_did_live(stopped: Launched, tmp_path: Path) -> None:
    entries = stopped.entries()
    position = next(
        n
        for n in range(len(entries) // 2, len(entries))
        if isinstance(entries[n], Message)
        and entries[n - 1].time < entries[n].time
        and open_after(live(stopped, 0, n))
    )
    exported = tmp_path / "stretch.jsonl.gz"
    since = format_time(entries[position].time)
    done = driftbell("export", stopped.journal, "--since", since, "--to", exported)
    assert done.returncode == 0, done.stderr
    events = replayed(stopped.configuration, exported)
    assert events == live(stopped, position)
    assert open_after(live(stopped, 0, position)) & {each["id"] for each in events}


def test_a_characteristic_of_a_stretch_does(stopped: Launched, tmp_path: Path) -> None:
    entries = stopped.entries()
    since = format_time(entries[len(entries) // 3].time)
    exported = tmp_path / "stretch.jsonl"
    words = ["--since", since, "--characteristic", "net-weight", "--to", exported]
    assert driftbell("export", stopped.journal, *words).returncode == 0
    first = next(n for n, each in enumerate(entries) if format_time(each.time) >= since)
    assert replayed(stopped.configuration, exported) == live(stopped, first)


def test_the_journal_itself_does(stopped: Launched) -> None:
    assert replayed(stopped.configuration, stopped.journal) == live(stopped, 0)


def test_its_alerts_are_explained(stopped: Launched) -> None:
    raised = [each for each in live(stopped, 0) if each["event"] == "raised"]
    for event in raised[:: max(1, len(raised) // 5)]:
        told = json.loads(driftbell("explain", stopped.journal, event["id"], "--json").stdout)
        assert (told["source"], told["agrees"]) == ("entries", "exactly")
        assert told["rang"]["value"] == event["statistic"]["value"]
        assert told["judged_by"]["unchanged"] is True
