"""kill -9 of the daemon, at random moments under load and at the places that matter most.

The short form runs with all tests; the long one, with the issue's figures:

    pytest -m long tests/faults
"""

from __future__ import annotations

import random
import signal
import threading
from dataclasses import dataclass
from pathlib import Path

import pytest
from brokers import TIMEOUT, Broker, mosquitto_path
from cuts import PLACES
from daemons import weighings
from faulty import (
    SHORT_ALERTS,
    Faulty,
    Feed,
    Published,
    Watcher,
    check_complete,
    check_same_as_published,
    faulty,
    single,
    torques,
)

BROKERS = ["embedded", "mosquitto"] if mosquitto_path() else ["embedded"]


@dataclass(frozen=True, slots=True)
class Scale:
    """How many deaths, at how many messages a second, and how many messages at least."""

    kills: int
    rate: int
    messages: int
    seed: int = 1


SCALES = [
    pytest.param(Scale(3, 2_000, 6_000), id="short"),
    *(
        pytest.param(Scale(20, 5_000, 80_000, seed), id=f"long-{seed}", marks=pytest.mark.long)
        for seed in (1, 2)
    ),
]


def kill_at_random(daemon: Faulty, feed: Feed, scale: Scale) -> None:
    """Kill it while messages come: at work, starting, connecting or sending again."""
    chance = random.Random(scale.seed)
    for _ in range(scale.kills):
        if chance.random() < 0.6:
            daemon.await_count(daemon.count() + chance.randrange(1, scale.rate // 4))
        # The moment is the fault: any wait on a condition would pick the same ones each time.
        threading.Event().wait(chance.uniform(0.0, 0.6))
        daemon.kill()
        daemon.launch()
    feed.await_sent(scale.messages)


@pytest.mark.parametrize("scale", SCALES)
def test_killed_under_load_readings_with_identity(
    scale: Scale, broker: Broker, tmp_path: Path
) -> None:
    messages = weighings(scale.messages * 4, scale.seed)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon,
    ):
        daemon.online()
        with Feed(broker.port, messages, scale.rate) as feed:
            kill_at_random(daemon, feed, scale)
        alerts = check_complete(daemon, watcher, feed.sent)
        check_same_as_published(daemon, alerts, feed.sent)
    assert len(alerts) > 10


@pytest.mark.parametrize("scale", SCALES)
def test_killed_under_load_values_only(scale: Scale, broker: Broker, tmp_path: Path) -> None:
    messages = torques(scale.messages * 4, scale.seed, broker=broker)
    configuration = single("cap-torque", alerts=SHORT_ALERTS)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, configuration) as daemon,
    ):
        daemon.online()
        with Feed(broker.port, messages, scale.rate) as feed:
            kill_at_random(daemon, feed, scale)
        alerts = check_complete(daemon, watcher, feed.sent)
    assert len(alerts) > 10


def die(daemon: Faulty, place: str, times: int) -> None:
    """Let it run until it kills itself there."""
    daemon.cut = place, times
    process = daemon.launch()
    assert process.wait(TIMEOUT) == -signal.SIGKILL, daemon.tail()
    daemon.cut = None


@pytest.mark.parametrize(
    ("broker", "deaths"),
    [
        (BROKERS[-1], 2),
        *(pytest.param(each, 12, marks=pytest.mark.long) for each in BROKERS),
    ],
    indirect=["broker"],
)
@pytest.mark.parametrize("place", [place for place in PLACES if place != "farewell"])
def test_killed_between_two_steps(place: str, deaths: int, broker: Broker, tmp_path: Path) -> None:
    chance = random.Random(f"{place} {deaths}")
    rate = 1_500
    messages = interleaved(rate * 4 * deaths, broker)
    snapshots = place == "before-commit-of-a-snapshot"  # there is one soon after each start
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port) as daemon,
    ):
        daemon.online()
        daemon.kill()
        with Feed(broker.port, messages, rate) as feed:
            for _ in range(deaths):
                die(daemon, place, 1 if snapshots else chance.randrange(1, 12))
            daemon.online()
            feed.await_sent(1_000)
        check_complete(daemon, watcher, feed.sent)


def test_killed_on_its_way_out(broker: Broker, tmp_path: Path) -> None:
    messages = weighings(1_000)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon,
    ):
        daemon.cut = "farewell", 1
        process = daemon.online().process
        assert process is not None
        with Feed(broker.port, messages, 2_000) as feed:
            daemon.await_count(400)
            daemon.signal(signal.SIGTERM)
            assert process.wait(TIMEOUT) == -signal.SIGKILL
            daemon.cut = None
            daemon.online()
            feed.await_sent(len(messages))
        check_complete(daemon, watcher, feed.sent)


def interleaved(count: int, broker: Broker) -> Published:
    """Readings with identity and values without, in turn."""
    pairs = zip(weighings(count // 2), torques(count // 2, broker=broker), strict=True)
    return [message for pair in pairs for message in pair]
