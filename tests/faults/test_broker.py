"""The broker is killed, forgets, comes back with an old store, overflows, or loses patience.

The long form: ``pytest -m long tests/faults``.
"""

from __future__ import annotations

import json
import random
import signal
import threading
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from brokers import Broker, Client, Mosquitto
from cable import Cable
from daemons import until, weighing, weighings
from faulty import (
    SHORT_ALERTS,
    Faulty,
    Feed,
    Watcher,
    check_complete,
    check_once,
    check_same_as_published,
    exported,
    faulty,
    journaled_alerts,
    single,
    torques,
    undisturbed,
)

from monitor.times import SECOND

STEADY = 1.1
"""Seconds a connection holds: those that end sooner, in a row, are taken for a rival's work."""


def save(broker: Mosquitto) -> None:
    """Let the broker write its store now."""
    assert broker._process is not None
    before = broker.log.read_text().count("Saving in-memory database")
    broker._process.send_signal(signal.SIGUSR1)
    until(
        lambda: broker.log.read_text().count("Saving in-memory database") > before, "a saved store"
    )


@pytest.mark.parametrize("rounds", [2, pytest.param(12, marks=pytest.mark.long)])
def test_a_broker_restored_from_a_stale_store(
    rounds: int, mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    """What the broker had handed over since it saved its store it hands over again."""
    chance = random.Random(rounds)
    messages = weighings(1_200 * rounds)
    broker = mosquitto()
    with faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon:
        daemon.online()
        for n in range(rounds):
            begin, end = 1_200 * n, 1_200 * (n + 1)
            stale = chance.randrange(begin + 100, end - 300)
            with Client(broker.port) as line:
                line.publish_all(messages[begin:stale])
                daemon.await_count(stale)
                # The store is to hold what is under way and what waits.
                daemon.signal(signal.SIGSTOP)
                line.publish_all(messages[stale : stale + 200])
                save(broker)
                daemon.signal(signal.SIGCONT)
                line.publish_all(messages[stale + 200 : end])
            until(
                lambda end=end: set(daemon.journaled()) >= set(messages[:end]),  # type: ignore[misc]
                "all messages",
                daemon.is_running,
            )
            threading.Event().wait(STEADY)
            broker.kill()
            broker.start()
            daemon.await_logged("connected", n + 2)
        until(lambda: set(daemon.journaled()) >= set(messages), "all", daemon.is_running)
        assert daemon.stop() == 0
        found = daemon.journaled()
        assert len(found) > len(messages), "the store was not stale: nothing came again"
        check_once(list(dict.fromkeys(found)), messages)
        alerts = journaled_alerts(daemon)
        check_same_as_published(daemon, alerts, messages)
    assert len(alerts) > 10


def test_a_session_that_is_gone(broker: Broker, tmp_path: Path) -> None:
    """The broker was restarted without its store, while readings were under way."""
    messages = weighings(1_200)
    if isinstance(broker, Mosquitto):
        (broker.configuration.parent / "mosquitto" / "mosquitto.db").unlink(missing_ok=True)
    with faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon:
        daemon.online()
        with Client(broker.port) as line:
            line.publish_all(messages[:600])
            daemon.await_count(600)
        daemon.signal(signal.SIGSTOP)
        with Client(broker.port) as line:
            line.publish_all(messages[600:900])
        broker.kill()
        broker.start()
        daemon.signal(signal.SIGCONT)
        daemon.await_logged("connected", 2, session_present=False)
        with Watcher(broker.port) as watcher, Client(broker.port) as line:
            line.publish_all(messages[900:])
            until(lambda: daemon.journaled()[-1] == messages[-1], "the last", daemon.is_running)
            until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
            assert daemon.stop() == 0
            watcher.alerts_until_farewell()
            health = watcher.last_health()
    # What was lost is missing: each jar has a number, and its lane counts them.
    came = daemon.journaled()
    check_once(came, [m for m in messages if m in set(came)])
    counts = health["counts"]
    assert counts["readings"] == len(came) < len(messages)
    assert counts["missing"] == len(messages) - len(came)
    assert health["sessions_lost"] == 1
    alerts = journaled_alerts(daemon)
    told = [e for e in map(json.loads, alerts) if e["rule"] == "session-lost"]
    assert [(e["event"], e["characteristic"]) for e in told][:1] == [("raised", "net-weight")]
    assert alerts == undisturbed(daemon.configuration, exported(daemon))


def test_a_queue_that_overflows(mosquitto: Callable[..., Mosquitto], tmp_path: Path) -> None:
    """The broker dropped what its queue had no room for: that many are said to be missing."""
    messages = weighings(3_000)
    broker = mosquitto(max_queued_messages=100)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon,
        Client(broker.port) as line,
    ):
        daemon.online()
        for n in range(0, 1_000, 50):  # a few at once, as the queue is short
            line.publish_all(messages[n : n + 50])
            daemon.await_count(n + 50)
        daemon.kill()
        line.publish_all(messages[1_000:2_900])
        daemon.online()
        daemon.await_count(1_100)
        for n in range(2_900, 3_000, 50):
            line.publish_all(messages[n : n + 50])
        until(lambda: daemon.journaled()[-1] == messages[-1], "the last", daemon.is_running)
        until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
        assert daemon.stop() == 0
        alerts = watcher.alerts_until_farewell()
        counts = watcher.last_health()["counts"]
    came = daemon.journaled()
    check_once(came, [m for m in messages if m in set(came)])
    assert len(came) < len(messages) - 1_000, "the queue did not overflow"
    assert counts["readings"] == len(came)
    assert counts["missing"] == len(messages) - len(came)
    check_same_as_published(daemon, alerts, came)


def test_a_stall_longer_than_the_keepalive(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    """The broker gives up on the connection; what it had sent into it comes again."""
    broker = mosquitto(log_type="all")
    messages = torques(6_000, broker=broker)
    configuration = single("cap-torque", alerts=SHORT_ALERTS, broker={"keepalive": "1s"})
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, configuration) as daemon,
    ):
        daemon.online()
        with Feed(broker.port, messages, 1_500) as feed:
            daemon.await_count(500)
            daemon.signal(signal.SIGSTOP)
            given_up = "driftbell-test has exceeded timeout"
            until(lambda: given_up in broker.log.read_text(), "the broker gives up")
            daemon.signal(signal.SIGCONT)
            daemon.await_logged("connected", 2)
            feed.await_sent(len(messages))
        check_complete(daemon, watcher, feed.sent)


@pytest.mark.parametrize("count", [6_000, pytest.param(60_000, marks=pytest.mark.long)])
def test_connections_that_break_under_load(count: int, broker: Broker, tmp_path: Path) -> None:
    """Cut by someone between: nobody said goodbye, and both ends hold what the other never read."""
    chance = random.Random(count)
    messages = torques(count, broker=broker)
    with (
        Watcher(broker.port) as watcher,
        Cable(broker.port) as cable,
        faulty(tmp_path / "a", cable.port, single("cap-torque", alerts=SHORT_ALERTS)) as daemon,
    ):
        daemon.online()
        with Feed(broker.port, messages, 2_000) as feed:
            cuts = 0
            while not feed.is_over:
                threading.Event().wait(STEADY + chance.random())
                cable.cut()
                cuts += 1
                daemon.await_logged("connected", cuts + 1)
        check_complete(daemon, watcher, feed.sent)
    assert cuts > 1


def test_what_never_arrives_is_said_again(broker: Broker, tmp_path: Path) -> None:
    """Alerts and acknowledgements were lost on their way, and then the daemon was killed."""
    start = int(time.time() - 600) * SECOND
    # Each pair of jars is of a head of its own, and an alert.
    messages = [weighing(n, start + n * SECOND // 10, 360.0, head=n // 2) for n in range(400)]
    with (
        Watcher(broker.port) as watcher,
        Cable(broker.port) as cable,
        faulty(tmp_path / "a", cable.port, single("net-weight")) as daemon,
        Client(broker.port) as line,
    ):
        daemon.online()
        line.publish_all(messages[:100])
        daemon.await_count(100)
        until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
        cable.hold()
        for n in range(100, 116, 4):  # commit by commit, and no more than any broker's window
            line.publish_all(messages[n : n + 4])
            daemon.await_count(n + 4)
        line.publish_all(messages[116:])
        assert daemon.waiting() >= 8
        daemon.kill()
        cable.cut()
        daemon.online()
        alerts = check_complete(daemon, watcher, messages)
    assert len(alerts) == 200


def test_two_daemons_with_one_client_id(broker: Broker, tmp_path: Path) -> None:
    """They end each other's connection. One of them sees why, says so, and leaves the other be."""
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as one,
        faulty(tmp_path / "b", broker.port, single("net-weight")) as other,
    ):
        one.online()
        other.online()
        why = "perhaps another client has our client id 'driftbell-test'"

        def waits(daemon: Faulty) -> list[float]:
            said = daemon.logged("not connected")
            return [line["next_try_in"] for line in said if why in line["why"]]

        until(lambda: max([*waits(one), *waits(other)], default=0.0) >= 2.0, "one backs off")
        watcher.await_health(one, lambda h: h["online"] and why in str(h["last_error"]))
        assert one.stop() == other.stop() == 0
