"""The daemon from outside: real processes on real brokers."""

from __future__ import annotations

import json
import os
import random
import re
import signal
import socket
import subprocess
import threading
from collections.abc import Callable, Iterator
from itertools import cycle, pairwise
from pathlib import Path
from typing import Any

import pytest
from brokers import Broker, Client, Embedded, Mosquitto
from daemons import (
    ALERTS,
    HEALTH,
    ROOT,
    Launched,
    await_health,
    by_stream,
    driftbell,
    events,
    goes_online,
    launched,
    recording,
    replayed,
    resident,
    started,
    until,
    weighing,
    weighings,
    with_,
)

from monitor import times
from monitor.demo.broker import HOST, free_port
from monitor.entries import Connected, Disconnected, Message, Started
from monitor.journal import AlertRow, Batch, Journal
from monitor.times import SECOND

TIME = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{3}(\d{3})?Z")
START = 1_772_433_672 * SECOND
TORQUE = "line-2/capper/torque"


@pytest.fixture
def watcher(broker: Broker) -> Iterator[Client]:
    """A client that collects everything under our root."""
    with Client(broker.port) as client:
        client.subscribe(f"{ROOT}/#")
        yield client


def settled(daemon: Launched, messages: list[tuple[str, bytes]]) -> None:
    """Wait until the journal holds all these messages and the broker has taken every alert."""

    def complete() -> bool:
        return daemon.count() >= len(messages) and set(daemon.journaled()) >= set(messages)

    until(complete, f"{len(messages)} messages", daemon.is_running)
    until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)


def retained(broker: Broker, topic: str) -> dict[str, Any]:
    """What the broker keeps under a topic."""
    with Client(broker.port) as client:
        client.subscribe(topic)
        (kept,) = client.wait_for(bool)
    assert kept.retained
    return kept.body


# ── what it says ─────────────────────────────────────────────────────────────────────────────────


def test_readings_become_alerts_with_every_field(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    with started(tmp_path / "a", broker.port), Client(broker.port) as line:
        line.publish_all(
            weighing(n, START + n * SECOND // 2, net, lane="1 é", head=4)
            for n, net in enumerate([340.0, 341.0, 348.0, 347.0], 1)
        )
        (message,) = watcher.wait_for(bool, ALERTS)
    assert message.topic == f"{ROOT}/alert/net-weight/4/1%20%C3%A9"
    assert (message.qos, message.retained) == (1, False)
    body = message.body
    for found, pattern in (
        (body.pop("id"), re.compile("[0-9a-f]{32}")),
        (body.pop("published"), TIME),
        (body["baseline"].pop("revision"), re.compile("[0-9a-f]+")),  # type: ignore[attr-defined]
        (body.pop("text"), re.compile("Net weight, .*has risen by about .* g since about .*")),
        (body.pop("caution"), re.compile(".+")),
    ):
        assert pattern.fullmatch(str(found)), found
    shift: Any = body.pop("shift")
    assert shift.keys() == {"estimate", "unit", "onset", "onset_from", "onset_to"}
    assert shift["estimate"] > 0
    assert shift["unit"] == "g"
    error = 2.0 / 2**0.5
    assert body == {
        "schema": 1,
        "sequence": 1,
        "event": "raised",
        "characteristic": "net-weight",
        "title": "Net weight, 340 g jar",
        "stream": {"head": "4", "lane": "1 é"},
        "time": "2026-03-02T06:41:14.000Z",
        "detector": "shewhart-mean",
        "chart": "mean",
        "rule": "outside-upper",
        "direction": "up",
        "priority": "medium",
        "statistic": {
            "name": "mean",
            "value": 347.5,
            "lower": pytest.approx(340 - 3 * error),
            "upper": pytest.approx(340 + 3 * error),
            "unit": "g",
        },
        "signals": [
            {
                "detector": "shewhart-mean",
                "rule": "outside-upper",
                "time": "2026-03-02T06:41:14.000Z",
                "count": 1,
            }
        ],
        "subgroup": {
            "number": 2,
            "size": 2,
            "mean": 347.5,
            "range": 1.0,
            "sd": pytest.approx(0.5**0.5),
            "first": "2026-03-02T06:41:13.500Z",
            "last": "2026-03-02T06:41:14.000Z",
        },
        "specification": {"nominal": 340.0, "lower": 331.0, "upper": 352.0},
        "baseline": {"mean": 340.0, "sigma": 2.0},
        "reaction": ["Check fill head 4 of lane 1 é for drips."],
        "reason": None,
    }


def test_points_show_each_subgroup_and_standings_what_is_open(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    config = with_(outputs={"root": ROOT, "points": True})
    standing = f"{ROOT}/standing/net-weight/1/1"
    with started(tmp_path / "a", broker.port, config), Client(broker.port) as line:
        for n in range(40):  # one by one, so that many are a batch of their own
            line.publish(*weighing(n, START + n * SECOND, 340.0))
        line.publish_all(weighing(n, START + n * SECOND, 350.0) for n in (40, 41))
        watcher.wait_for(lambda ms: any(m.body["open"] for m in ms), standing)
        said = watcher.received(standing)
        points = watcher.wait_for(lambda ms: len(ms) == 21, f"{ROOT}/point/net-weight/1/1")
    assert {(m.qos, m.retained) for m in points} == {(1, False)}
    assert [m.body["number"] for m in points] == list(range(1, 22))
    last: Any = points[-1].body
    assert (last["mean"], last["range"], last["size"], last["unit"]) == (350.0, 0.0, 2, "g")
    assert [(r["detector"], r["statistic"], r["rules"]) for r in last["rows"]] == [
        ("shewhart-mean", "mean", ["outside-upper"]),
        ("cusum", "upper_sum", ["cusum-upper"]),
        ("cusum", "lower_sum", []),
    ]
    bodies: list[Any] = [m.body for m in said]
    assert bodies[0]["open"] == []
    for one, two in pairwise(bodies):
        waited = times.parse_iso_time(two["time"]) - times.parse_iso_time(one["time"])
        assert one["open"] != two["open"] or waited >= 10 * SECOND
    kept = retained(broker, standing)
    assert kept["judging"]["judging"] is True
    assert [each["rule"] for each in kept["open"]] == ["outside-upper"]


def test_what_cannot_be_used_is_said_and_moves_nothing(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    topic, good = weighing(1, START, 340.0)
    hostile: list[bytes] = [
        b"",
        b"{",
        b"\xff\xfe\x00",
        b"[" * 5_000,
        b'{"net": 1e999}',
        b'{"t": "2026-03-02T06:41:12Z", "n": 2, "head": "\\ud800", "net": 340}',
        b'{"t": "2026-03-02T06:41:12", "n": 2, "head": 1, "net": 340}',
        b'{"t": "2026-03-02T06:41:12Z", "n": 2, "head": 1, "net": true}',
        b"x" * (300 * 1024),
    ]
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as line:
        line.publish_all([*((topic, payload) for payload in hostile), (topic, good)])
        line.publish(topic, good, retain=True)
        line.publish(topic, good, qos=0)
        until(lambda: daemon.count() == len(hostile) + 3, "all", daemon.is_running)
        notices = watcher.wait_for(
            lambda ms: {m.body["reason"] for m in ms} >= {"not-json", "repeated", "oversized"},
            f"{ROOT}/setaside",
        )
        assert daemon.stop() == 0
    first: Any = notices[0].body
    assert first["reason"] == "not-json"
    assert first["example"].keys() == {"characteristic", "topic", "payload", "time"}
    assert first["example"]["topic"] == topic
    last = await_health(watcher, lambda h: h["last_error"] == "stopped")
    assert last["counts"] == {
        "messages": len(hostile) + 3,
        "readings": 1,
        "set_aside": {
            "not-json": 4,
            "no-stream": 2,
            "bad-time": 1,
            "not-a-number": 1,
            "oversized": 1,
            "repeated": 2,
        },
        "subgroups": 0,
        "abandoned": 0,
        "missing": 0,
        "alerts": 0,
    }
    # The embedded broker delivers at the subscription's QoS, whatever the publisher's.
    assert last["qos_0"] == (0 if isinstance(broker, Embedded) else 1)


@pytest.mark.parametrize("lane", ["a b", "ä/".strip("/"), "☃", '"', "%2F", "$x", ".", "x" * 256])
def test_any_stream_name_has_its_topic(lane: str, streams: tuple[Client, Client]) -> None:
    line, watcher = streams
    line.publish_all(weighing(n, START + n, 350.0, lane) for n in (1, 2))
    (alert,) = watcher.wait_for(bool, f"{ROOT}/alert/net-weight/1/{encoded(lane)}")
    assert alert.body["stream"] == {"head": "1", "lane": lane}


def encoded(text: str) -> str:
    """Percent-encoding as in RFC 3986, section 2: all but unreserved characters."""
    keep = re.compile(r"[A-Za-z0-9._~-]")
    return "".join(c if keep.match(c) else "".join(f"%{b:02X}" for b in c.encode()) for c in text)


@pytest.fixture(scope="module")
def streams(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Client, Client]]:
    """(line, watcher): two clients of an embedded broker with a daemon on it."""
    folder = tmp_path_factory.mktemp("streams")
    server = Embedded(folder)
    server.start()
    with (
        started(folder / "a", server.port),
        Client(server.port) as line,
        Client(server.port) as watcher,
    ):
        watcher.subscribe(f"{ROOT}/#")
        yield line, watcher
    server.stop()


# ── how it ends ──────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_takes_its_leave_in_the_middle_of_a_flood(
    number: signal.Signals, broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as line:
        process = daemon.process
        assert process is not None
        enough = threading.Event()
        sent = cycle(weighings(2_000))

        def flood() -> None:
            while not enough.is_set():
                line.publish_all([next(sent) for _ in range(50)])

        thread = threading.Thread(target=flood)
        thread.start()
        until(lambda: daemon.count() > 500, "a flood", daemon.is_running)
        process.send_signal(number)
        try:
            assert process.wait(5) == 0
        finally:
            enough.set()
            thread.join()
        last = watcher.wait_for(lambda ms: ms[-1].body["last_error"] == "stopped", HEALTH)[-1].body
        assert last["online"] is False
        kept = retained(broker, HEALTH)
    assert kept == last, "the will came after the farewell"


def test_the_broker_speaks_for_a_daemon_that_is_killed(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    with started(tmp_path / "a", broker.port) as daemon:
        await_health(watcher, lambda h: h["online"])
        daemon.kill()
        said = await_health(watcher, lambda h: not h["online"])
    assert said["last_error"] == "the connection to the broker ended without a word"
    assert retained(broker, HEALTH) == said


@pytest.fixture
def black_hole() -> Iterator[int]:
    """A port that no connection gets through to: the queue of who listens there is full."""
    with socket.socket() as listener, socket.socket() as first, socket.socket() as second:
        listener.bind((HOST, 0))
        listener.listen(0)
        first.connect(listener.getsockname())
        second.setblocking(False)
        second.connect_ex(listener.getsockname())
        yield listener.getsockname()[1]


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_stops_while_it_is_connecting(
    number: signal.Signals, black_hole: int, tmp_path: Path
) -> None:
    with launched(tmp_path / "a", black_hole) as daemon:
        daemon.await_logged("started")
        process = daemon.process
        assert process is not None
        process.send_signal(number)
        assert process.wait(5) == 0
        assert daemon.logged("stopped")
        assert not daemon.logged("not connected")


def test_stops_at_a_broker_that_accepts_and_says_nothing(tmp_path: Path) -> None:
    with (
        socket.create_server((HOST, 0)) as listener,
        launched(tmp_path / "a", listener.getsockname()[1]) as daemon,
    ):
        connection, _ = listener.accept()
        with connection:
            assert connection.recv(1) == b"\x10"  # CONNECT
            assert daemon.stop() == 0


def test_stops_while_it_reads_its_journal(tmp_path: Path) -> None:
    daemon = Launched(tmp_path / "a", free_port())
    journal = Journal(daemon.journal)
    journal.commit(Batch([Message(START, *weighing(1, START, 340.0))] * 300_000))
    journal.close()
    process = daemon.launch()
    daemon.await_logged("starting")
    process.send_signal(signal.SIGTERM)
    assert process.wait(5) == 0
    assert not daemon.logged("started"), "it had read it all: make the journal longer"
    assert daemon.logged("stopped")


# ── the broker comes and goes ────────────────────────────────────────────────────────────────────


def test_waits_for_a_broker_that_is_not_there(broker: Broker, tmp_path: Path) -> None:
    broker.stop()
    with launched(tmp_path / "a", broker.port) as daemon:
        daemon.await_logged("not connected", 3)
        broker.start()
        daemon.await_logged("connected")
        with Client(broker.port) as watcher:
            watcher.subscribe(ALERTS)
            watcher.publish_all(weighing(n, START + n, 350.0) for n in (1, 2))
            watcher.wait_for(bool)
        assert daemon.stop() == 0
    waits = [line["next_try_in"] for line in daemon.logged("not connected")]
    assert waits == sorted(waits), "it tries ever more seldom"


def test_comes_back_to_a_broker_that_was_killed(broker: Broker, tmp_path: Path) -> None:
    with started(tmp_path / "a", broker.port) as daemon:
        broker.kill()
        assert daemon.await_logged("not connected")["next_try_in"] <= 0.1
        broker.start()
        with Client(broker.port) as watcher:
            watcher.subscribe(f"{ROOT}/#")
            watcher.wait_for(lambda ms: any(m.topic == HEALTH and goes_online(m) for m in ms))
            watcher.publish_all(weighing(n, START + n, 350.0) for n in (1, 2))
            watcher.wait_for(bool, ALERTS)
            said = await_health(watcher, lambda h: h["online"])
        kinds = [type(e) for e in daemon.entries() if type(e) in (Started, Connected, Disconnected)]
    assert kinds == [Started, Connected, Disconnected, Connected]
    assert said["last_error"]


def test_resumes_its_session_at_a_broker_that_was_restarted(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    server = mosquitto()
    messages = weighings(1_200)
    with started(tmp_path / "a", server.port) as daemon:
        with Client(server.port) as line:
            line.publish_all(messages[:400])
        server.stop()
        server.start()
        with Client(server.port) as line:
            line.publish_all(messages[400:800])
        daemon.await_logged("connected", session_present=True)
        daemon.kill()
        with Client(server.port) as line:
            line.publish_all(messages[800:])
        daemon.start()
        settled(daemon, messages)
    # At least once, and in order but for what was sent again.
    assert list(dict.fromkeys(daemon.journaled())) == messages


def test_wrong_credentials_are_said_and_tried_again(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    users = tmp_path / "users"
    users.touch(0o600)
    server = mosquitto(allow_anonymous="false", password_file=users)
    secret = "correct horse battery staple"
    (tmp_path / "a").mkdir()
    (tmp_path / "a" / "password").write_text(f"{secret}\n")
    broker = {"username": "monitor", "password_file": "password"}
    with launched(tmp_path / "a", server.port, with_(broker=broker)) as daemon:
        why = daemon.await_logged("not connected", 2)["why"]
        assert "refused" in why
        subprocess.run(["mosquitto_passwd", "-b", users, "monitor", secret], check=True)
        assert server._process is not None
        server._process.send_signal(signal.SIGHUP)  # read the users again
        daemon.await_logged("connected")
        assert daemon.stop() == 0
        log = daemon.log.read_text()
    assert secret not in log
    assert secret.split()[0] not in log


def test_a_refused_subscription_is_said_and_never_online(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    rules = tmp_path / "rules.json"
    access = {"publishClientSend": True, "publishClientReceive": True, "unsubscribe": True}
    allow = [
        {"acltype": "subscribePattern", "topic": topic, "allow": True}
        for topic in (TORQUE, f"{ROOT}/#")
    ]
    rules.write_text(
        json.dumps(
            {
                "defaultACLAccess": access | {"subscribe": False},
                "roles": [{"rolename": "some", "acls": allow}],
                "groups": [{"groupname": "all", "roles": [{"rolename": "some"}]}],
                "anonymousGroup": "all",
                "clients": [],
            }
        )
    )
    library = next(Path("/usr/lib").glob("**/mosquitto_dynamic_security.so"), None)
    if library is None:
        pytest.skip("mosquitto was built without its dynamic security plugin")
    server = mosquitto(plugin=library, plugin_opt_config_file=rules)
    with Client(server.port) as watcher:
        watcher.subscribe(HEALTH)
        with launched(tmp_path / "a", server.port) as daemon:
            why = daemon.await_logged("not connected", 2)["why"]
            assert why == "the broker refused the subscription to line-2/scale/+/reading"
            assert daemon.stop() == 0
        assert not any(goes_online(m) for m in watcher.received())


def test_keeps_a_quiet_connection_alive(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    server = mosquitto(log_type="all")
    with started(tmp_path / "a", server.port, with_(broker={"keepalive": "1s"})) as daemon:
        pings = "Received PINGREQ from driftbell-test"
        until(lambda: server.log.read_text().count(pings) >= 3, "pings", daemon.is_running)
        assert not daemon.logged("not connected")


def test_the_journals_log_is_carried_over_while_readings_come(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    # One reading at a time, so that each is a commit of its own.
    server = mosquitto(set_tcp_nodelay="true")
    points = f"{ROOT}/point/cap-torque"
    configuration = with_(outputs={"root": ROOT, "points": True})
    with (
        started(tmp_path / "a", server.port, configuration) as daemon,
        Client(server.port) as gauge,
        Client(server.port) as watcher,
    ):
        watcher.subscribe(points, qos=0)
        for n in range(1, 601):
            gauge.publish(TORQUE, b"2.0")
            watcher.wait_for(lambda ms, n=n: len(ms) >= n, points, daemon.is_running)
        log = Path(f"{daemon.journal}-wal").stat().st_size
    # Two pages a commit: 1,240 of them where nothing is carried over, some 430 where it is.
    assert log < 800 * 4_096


def pid(broker: Broker) -> int:
    """The broker's process."""
    process = broker._broker.process if isinstance(broker, Embedded) else broker._process
    assert process is not None
    return process.pid


def test_a_broker_that_stops_reading_costs_no_alert(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    messages = weighings(4_000)
    config = with_(outputs={"root": ROOT, "points": True})
    with started(tmp_path / "a", broker.port, config) as daemon, Client(broker.port) as line:
        process = daemon.process
        assert process is not None
        line.publish_all(messages[:2_000])
        until(lambda: daemon.count() > 1_000, "some messages", daemon.is_running)
        before = resident(process)
        os.kill(pid(broker), signal.SIGSTOP)
        try:
            seen = -1
            while seen != (seen := daemon.count()):  # what the kernel holds for it
                threading.Event().wait(0.3)
            assert resident(process) < before + (64 << 20)
        finally:
            os.kill(pid(broker), signal.SIGCONT)
        line.publish_all(messages[2_000:])
        settled(daemon, messages)
        expected = replayed(daemon.configuration, recording(tmp_path / "x.jsonl", messages))
        watcher.wait_for(lambda ms: len(events(ms)) >= len(expected), ALERTS)
        found = events(watcher.received(ALERTS))
    assert by_stream(found) == by_stream(expected)
    assert len(expected) > 10


# ── nothing lost, nothing twice ──────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("seed", [1])
def test_killed_at_any_moment_it_loses_nothing(
    seed: int, broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    messages = weighings(4_000, seed)
    chance = random.Random(seed)
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as line:
        thread = threading.Thread(target=line.publish_all, args=(messages,))
        thread.start()
        for share in sorted(chance.uniform(0.05, 0.95) for _ in range(4)):
            until(lambda s=share: daemon.count() >= s * len(messages), "work", daemon.is_running)
            daemon.kill()
            daemon.launch()
        thread.join()
        settled(daemon, messages)
        expected = replayed(daemon.configuration, recording(tmp_path / "x.jsonl", messages))
        found = events(watcher.wait_for(lambda ms: len(events(ms)) >= len(expected), ALERTS))
    assert by_stream(found) == by_stream(expected)
    assert len(expected) > 10


def test_alerts_under_way_are_sent_again(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    # Each jar on a head of its own, and each pair an alert.
    messages = [weighing(n, START + n, 360.0, head=n // 2) for n in range(3_000)]
    server = mosquitto(max_inflight_messages=1000)
    with started(tmp_path / "a", server.port) as daemon:
        with Client(server.port, "watcher", clean=False) as watcher:
            watcher.subscribe(ALERTS)
        with Client(server.port) as line:
            line.publish_all(messages)
        until(lambda: daemon.waiting() > 50, "alerts in the outbox", daemon.is_running)
        server.stop()
        server.start()
        with Client(server.port, "watcher", clean=False) as watcher:
            settled(daemon, messages)
            found = events(watcher.wait_for(lambda ms: len(events(ms)) >= 1_500))
        assert daemon.logged("not connected")
    assert {e["stream"]["head"] for e in found} == {str(n) for n in range(1_500)}


def test_live_and_replay_give_the_same_alerts(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    chance = random.Random(7)
    messages = weighings(1_500)
    mixed: list[tuple[str, bytes]] = []
    for each in messages:
        mixed.append(each)
        if chance.random() < 0.1:
            mixed.append((each[0], chance.choice([b"", b"\x00\xff", b"{}", b"[1]", each[1]])))
        if chance.random() < 0.3:  # no time and no number: known by arrival and place only
            mixed.append((TORQUE, f"{chance.gauss(2.0, 0.15):.3f}".encode()))
    exported = tmp_path / "x.jsonl"
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as line:
        line.publish_all(mixed)
        until(lambda: daemon.count() == len(mixed), "all messages", daemon.is_running)
        until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
        done = driftbell("export", daemon.journal, "--to", exported)
        assert done.returncode == 0, done.stderr.decode()
        expected = replayed(daemon.configuration, exported)
        found = events(watcher.wait_for(lambda ms: len(events(ms)) >= len(expected), ALERTS))
        assert daemon.stop() == 0
    assert by_stream(found) == by_stream(expected)
    assert {e["event"] for e in expected} >= {"raised", "updated", "returned-to-normal"}
    assert {e["characteristic"] for e in expected} == {"net-weight", "cap-torque"}


def test_after_a_restart_it_goes_on_where_it_was(
    broker: Broker, watcher: Client, tmp_path: Path
) -> None:
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as line:
        line.publish_all(weighing(n, START + n * SECOND, 350.0) for n in range(3))
        watcher.wait_for(lambda ms: len(ms) == 1, ALERTS)
        until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
        assert daemon.stop() == 0
        # As if the last alert had not been acknowledged.
        (alert,) = watcher.received(ALERTS)
        journal = Journal(daemon.journal)
        left = {**alert.body, "text": "left over"}
        del left["published"]
        row = AlertRow(alert.topic, left["id"], json.dumps(left).encode(), b"", 0)
        journal.commit(Batch([Started(journal.last_time)], [row]))
        journal.close()
        daemon.start()
        # The fourth completes the subgroup of the third, and the CUSUM joins the alert.
        line.publish_all(weighing(n, START + n * SECOND, 350.0) for n in range(3, 60))
        line.publish_all(weighing(n, START + n * SECOND, 340.0) for n in range(60, 100))
        returned = watcher.wait_for(
            lambda ms: ms[-1].body["event"] == "returned-to-normal" if ms else False, ALERTS
        )
    bodies: list[Any] = [m.body for m in returned]
    assert [b["text"] == "left over" for b in bodies][:2] == [False, True]
    assert "published" in bodies[1]
    del bodies[1]
    assert [b["sequence"] for b in bodies] == list(range(1, len(bodies) + 1))
    assert {b["id"] for b in bodies} == {bodies[0]["id"]}
