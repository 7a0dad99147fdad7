"""The configuration is edited between readings: by SIGHUP, by a restart, and with a crash after it.

What must come of an edit is the same whichever way it arrives.
"""

from __future__ import annotations

import json
import random
import signal
import time
from collections.abc import Callable, Iterable
from itertools import pairwise
from pathlib import Path
from typing import Any

import yaml
from brokers import Broker, Client, Embedded
from daemons import ROOT, recording, until, weighing, weighings
from faulty import (
    Faulty,
    Published,
    Watcher,
    check_complete,
    check_same_as_published,
    faulty,
    journaled_alerts,
    single,
    undisturbed,
)

from monitor.entries import Configured
from monitor.times import SECOND

Event = dict[str, Any]

READ_AGAIN = "the configuration was read again"
BETWEEN = 1_001
"""Messages between two edits: at each, subgroups are open, and alerts of both detectors."""


def drifting(count: int) -> Published:
    """Jars of two lanes with three heads each, ten a second, that are too heavy now and then: those
    of one lane by so much that one subgroup shows it, those of the other by less."""
    chance = random.Random(4)
    start = int(time.time() - count / 10 - 5) * SECOND
    messages = []
    for i in range(count):
        lane, head = str(i % 2 + 1), i % 6 // 2 + 1
        shift = 0.0 if (i + 250) // 500 % 2 else {"1": 10.0, "2": 1.5}[lane]
        net = round(chance.gauss(340.0 + shift, 2.0), 2)
        messages.append(weighing(i // 2, start + i * SECOND // 10, net, lane, head))
    return messages


def title(weight: dict[str, Any]) -> None:
    """Moves nothing."""
    weight["title"] = "Weight of a jar"


def detector(weight: dict[str, Any]) -> None:
    """Restarts it, and ends its alerts."""
    weight["detectors"][0]["width"] = 2.5


def baseline(weight: dict[str, Any]) -> None:
    """Restarts all detectors, and ends all alerts."""
    weight["baseline"]["mean"] = 340.5


def edit(daemon: Faulty, change: Callable[[dict[str, Any]], None]) -> None:
    """Write the configuration anew."""
    document = yaml.safe_load(daemon.configuration.read_text())
    change(document["characteristics"]["net-weight"])
    daemon.configuration.write_text(yaml.safe_dump(document, allow_unicode=True))


def hang_up(daemon: Faulty) -> None:
    """Let it read its configuration again, and wait until that is durable."""
    before = len(daemon.logged(READ_AGAIN)), configured(daemon)
    daemon.signal(signal.SIGHUP)
    daemon.await_logged(READ_AGAIN, before[0] + 1)
    until(lambda: configured(daemon) > before[1], "the new configuration", daemon.is_running)


def restart(daemon: Faulty) -> None:
    """End it in order and start it again."""
    assert daemon.stop() == 0
    daemon.online()


def hang_up_and_crash(daemon: Faulty) -> None:
    """As if the power went right after the edit."""
    hang_up(daemon)
    daemon.kill()
    daemon.online()


def configured(daemon: Faulty) -> int:
    """How many configurations the journal holds."""
    return sum(isinstance(entry, Configured) for entry in daemon.entries())


def send(client: Client, daemon: Faulty, messages: Published) -> None:
    """Publish what comes next, and wait until the daemon has it, and consumers its alerts."""
    before = daemon.count()
    client.publish_all(messages)
    daemon.await_count(before + len(messages))
    until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)


def opened(events: list[Event]) -> dict[str, Event]:
    """The alerts that are open after these events: the id of each, and how it was raised."""
    found: dict[str, Event] = {}
    for event in events:
        if event["event"] == "raised":
            found[event["id"]] = event
        elif event["event"] in ("withdrawn", "returned-to-normal"):
            found.pop(event["id"], None)
        elif event["event"] == "rejoined":
            found[event["id"]] = event
    return found


def withdrawn(events: list[Event]) -> set[str]:
    """The ids of alerts that a changed configuration ended."""
    ended = [event for event in events if event["event"] == "withdrawn"]
    assert {event["reason"] for event in ended} <= {"configuration"}
    return {event["id"] for event in ended}


def edited(way: Callable[[Faulty], None], messages: Published, folder: Path) -> list[list[Event]]:
    """The alert events before the first edit of a run, and after each."""
    folder.mkdir()
    broker = Embedded(folder)
    broker.start()
    try:
        with (
            Watcher(broker.port) as watcher,
            Client(broker.port) as client,
            faulty(folder / "a", broker.port, single("net-weight")) as daemon,
        ):
            daemon.online()
            send(client, daemon, messages[:BETWEEN])
            ends = [len(journaled_alerts(daemon))]
            for n, change in enumerate((title, detector, baseline), 1):
                edit(daemon, change)
                way(daemon)
                send(client, daemon, messages[n * BETWEEN : (n + 1) * BETWEEN])
                ends.append(len(journaled_alerts(daemon)))
            assert daemon.stop() == 0
            events = [json.loads(alert) for alert in watcher.alerts_until_farewell()]
    finally:
        broker.stop()
    assert ends[-1] == len(events)
    return [events[begin:end] for begin, end in pairwise([0, *ends])]


def test_edits_mid_stream(tmp_path: Path) -> None:
    messages = drifting(4 * BETWEEN)
    ways = (hang_up, restart, hang_up_and_crash)
    runs = [edited(way, messages, tmp_path / way.__name__) for way in ways]
    for run in runs:
        for event in (event for part in run for event in part):
            if event["event"] == "withdrawn":
                del event["time"]  # when the edit was read
    assert runs[0] == runs[1] == runs[2]

    start, retitled, redetected, rebased = runs[0]
    # The title is another from then on; no alert begins, ends or is numbered otherwise.
    assert {event["title"] for event in start} == {"Net weight, 340 g jar"}
    assert {event["title"] for event in retitled} == {"Weight of a jar"}
    daemon = Faulty(tmp_path / "b", 1, single("net-weight"))
    recorded = recording(tmp_path / "all.jsonl", messages[: 2 * BETWEEN])
    unedited = map(json.loads, undisturbed(daemon.configuration, recorded))
    assert untitled([*start, *retitled]) == untitled(unedited)
    assert {event["id"] for event in retitled} & opened(start).keys()
    # The detector's own alerts end, and no others.
    open_then = opened([*start, *retitled])
    of_it = {n for n, event in open_then.items() if event["detector"] == "shewhart-mean"}
    assert withdrawn(redetected) == of_it
    assert set() < of_it < open_then.keys()
    # All end.
    open_then = opened([*start, *retitled, *redetected])
    assert withdrawn(rebased) == open_then.keys() != set()
    assert {event["baseline"]["mean"] for event in rebased if event["event"] == "raised"} == {340.5}


def untitled(events: Iterable[Event]) -> list[Event]:
    """The events without the words that a title is part of."""
    return [{k: v for k, v in event.items() if k not in ("title", "text")} for event in events]


def refusals(daemon: Faulty) -> int:
    """How often it has said that it does not take a configuration."""
    return daemon.log.read_text().count("the changed configuration is not used")


def test_a_broken_edit_changes_nothing(broker: Broker, tmp_path: Path) -> None:
    messages = weighings(1_000)
    with (
        Watcher(broker.port) as watcher,
        Client(broker.port) as client,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon,
    ):
        daemon.online()
        send(client, daemon, messages[:500])
        right = daemon.configuration.read_text()
        for wrong in ("{", right.replace("sigma", "sigmund"), "", right.replace(ROOT, "line-3")):
            before = refusals(daemon)
            daemon.configuration.write_text(wrong)
            daemon.signal(signal.SIGHUP)
            until(lambda n=before: refusals(daemon) > n, "a refusal", daemon.is_running)  # type: ignore[misc]
        daemon.configuration.write_text(right)
        send(client, daemon, messages[500:])
        assert configured(daemon) == 1
        alerts = check_complete(daemon, watcher, messages)
        check_same_as_published(daemon, alerts, messages)
