"""``driftbell-replay send`` on real brokers: what arrives, when, and what goes wrong."""

from __future__ import annotations

import json
import os
import pty
import select
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from typing import Any

import pytest
from brokers import TIMEOUT, Broker, Client, Daemon, Mosquitto

from monitor.demo.broker import HOST, free_port
from monitor.entries import Connected, Message, Started, Tick
from monitor.journal import Batch, Journal
from monitor.recording_lines import write_jsonl
from replay import sending
from replay.__main__ import main
from replay.commands import send as command

START = 1_577_934_000_000_000  # 2020-01-02T03:00Z
PAYLOADS = [
    b'{"net":341.2,"head":4}',
    b'{ "net": 341.20 }',
    b"2.05",
    b"",
    b"\x00\xff\xfe",
    b"NaN",
    '{"title":"340 g, Düse 4 \u2028"}'.encode(),
    b"x" * 5000,
    b'"text"',
    b"null",
]


def record(path: Path, messages: Sequence[Message]) -> str:
    with path.open("wb") as file:
        write_jsonl(file, messages)
    return str(path)


def numbered(count: int, apart: float) -> list[Message]:
    """Messages a line of which tells it from the others, ``apart`` seconds from each other."""
    return [Message(START + round(i * apart * 1e6), "line/n", b"%d" % i) for i in range(count)]


def at(port: int) -> list[str]:
    return ["--broker", f"{HOST}:{port}"]


@pytest.fixture
def send(capfd: pytest.CaptureFixture[str]) -> Callable[..., tuple[int, str, str]]:
    def send(*arguments: str) -> tuple[int, str, str]:
        try:
            status = main(["send", *arguments])
        except SystemExit as error:  # argparse's own
            status = int(str(error.code))
        return status, *capfd.readouterr()

    return send


Send = Callable[..., tuple[int, str, str]]


# ── what arrives ─────────────────────────────────────────────────────────────────────────────────


def test_a_subscriber_receives_the_recording_to_the_byte_and_in_order(
    broker: Broker, client: Client, send: Send, tmp_path: Path
) -> None:
    topics = ["plant/1/reading", "plant/torque", "plant/Düse 4"]
    messages = [
        Message(START + n * 1_000, topics[n % 3], PAYLOADS[n % len(PAYLOADS)]) for n in range(2000)
    ]
    messages[7].qos = 0
    held = [Started(START), Connected(START, False), *messages[:1000], Tick(START + 10**6)]
    with (tmp_path / "a.jsonl").open("wb") as file:
        write_jsonl(file, [*held, *messages[1000:]])
    client.subscribe("plant/#")
    path = str(tmp_path / "a.jsonl")
    status, out, err = send(path, *at(broker.port), "--speed", "max", "--json")
    came = client.wait_for(lambda ms: len(ms) == len(messages))
    assert [(m.topic, m.payload, m.qos) for m in came] == [
        (m.topic, m.payload, 1) for m in messages
    ]
    assert (status, err) == (0, "")
    report = json.loads(out)
    assert report.pop("seconds") > 0
    assert report == {
        "messages": 2000,
        "control": 3,
        "unsent": 0,
        "reconnects": 0,
        "line": 2003,
    }


def test_a_journal_is_sent_too_and_what_was_retained_is_retained_again(
    broker: Broker, client: Client, send: Send, tmp_path: Path
) -> None:
    journal = Journal(tmp_path / "a.db")
    kept = Message(START, "line/kept", b"old news", retain=True)
    journal.commit(Batch([Started(START), kept, Message(START + 1, "line/a", b"1.0")]))
    journal.close()
    client.subscribe("line/#")
    status, out, _ = send(str(tmp_path / "a.db"), *at(broker.port))
    came = client.wait_for(lambda ms: len(ms) == 2)
    assert [(m.topic, m.payload) for m in came] == [("line/kept", b"old news"), ("line/a", b"1.0")]
    assert status == 0
    assert f"Sent 2 messages of {tmp_path / 'a.db'} in 0." in out
    assert "skipped 1 control lines" in out
    with Client(broker.port) as later:
        later.subscribe("line/#")
        (only,) = later.wait_for(bool)
    assert (only.topic, only.retained) == ("line/kept", True)


def test_lines_that_cannot_be_sent_are_named_and_the_rest_is_sent(
    broker: Broker, client: Client, send: Send, tmp_path: Path
) -> None:
    path = tmp_path / "a.jsonl"
    topics = ["line/a", "line/+", "", "line/\\u0000", "line/b"]
    lines = [f'{{"time":{n},"topic":"{topic}","payload":{n}}}' for n, topic in enumerate(topics)]
    path.write_text("\n".join(["no line", *lines]))
    client.subscribe("line/#")
    status, out, err = send(str(path), *at(broker.port), "--json", "--speed", "max")
    came = client.wait_for(lambda ms: len(ms) == 2)
    assert [(m.topic, m.payload) for m in came] == [("line/a", b"0"), ("line/b", b"4")]
    assert status == 0
    assert json.loads(out)["unsent"] == 4
    assert [line.split(": ")[0] for line in err.splitlines()] == [
        f"{path}:{n}" for n in (1, 3, 4, 5)
    ]


def test_a_daemon_that_hears_it_rings_as_a_play_does(
    broker: Broker,
    client: Client,
    daemon: Callable[..., Daemon],
    send: Send,
    tmp_path: Path,
) -> None:
    configuration: dict[str, Any] = {
        "version": 1,
        "broker": {"host": "localhost"},
        "outputs": {"root": "test/monitor"},
        "journal": {"path": "line.db"},
        "characteristics": {
            "net-weight": {
                "source": {
                    "topic": "plant/reading",
                    "payload": "json",
                    "value": "/net",
                    "time": "/t",
                    "sequence": "/n",
                    "stream": {"head": "/head"},
                },
                "subgroup": {"size": 5},
                "baseline": {"mean": 340, "sigma": 1},
                "detectors": [{"kind": "shewhart"}, {"kind": "cusum", "k": 0.5, "h": 5}],
            }
        },
    }
    readings = [
        {"t": (START + n * 10**5) / 1e6, "n": n, "head": n % 2, "net": 340 + (n > 300) + n % 7 / 10}
        for n in range(600)
    ]
    messages = [
        Message(START + n * 10**5, "plant/reading", json.dumps(reading).encode())
        for n, reading in enumerate(readings)
    ]
    recording = record(tmp_path / "a.jsonl", messages)
    path = tmp_path / "line.yaml"
    path.write_text(json.dumps(configuration))
    alerts = tmp_path / "alerts.jsonl"
    assert main(["play", str(path), recording, "--alerts", str(alerts)]) == 0
    expected = [json.loads(line) for line in alerts.read_text().splitlines()]
    assert expected
    client.subscribe("test/monitor/alert/#")
    watched = daemon(configuration)
    assert send(recording, *at(broker.port), "--speed", "max")[0] == 0
    came = client.wait_for(lambda ms: len(ms) == len(expected))
    assert [{k: v for k, v in m.body.items() if k != "published"} for m in came] == expected
    # The daemon's journal, while it runs: the same once more.
    journal = str(watched.configuration.parent / "line.db")
    assert main(["play", str(path), journal, "--alerts", str(alerts)]) == 0
    assert [json.loads(line) for line in alerts.read_text().splitlines()] == expected


# ── when ─────────────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize(("speed", "least"), [("10", 1.2), ("20", 0.6)])
def test_a_multiple_of_its_own_timing(
    broker: Broker, client: Client, send: Send, tmp_path: Path, speed: str, least: float
) -> None:
    messages = numbered(13, apart=1.0)
    client.subscribe("line/#")
    began = time.monotonic()
    path = record(tmp_path / "a.jsonl", messages)
    assert send(path, *at(broker.port), "--speed", speed)[0] == 0
    # The last is due 12 s after the first by the recording, and never early.
    assert time.monotonic() - began >= least
    assert len(client.wait_for(lambda ms: len(ms) == 13)) == 13


def test_arrivals_that_run_backwards_wait_for_nothing(
    broker: Broker, client: Client, send: Send, tmp_path: Path
) -> None:
    messages = [Message(START + s * 10**6, "line/n", b"%d" % s) for s in (100, 0, 50)]
    client.subscribe("line/#")
    assert send(record(tmp_path / "a.jsonl", messages), *at(broker.port))[0] == 0
    came = client.wait_for(lambda ms: len(ms) == 3)
    assert [m.payload for m in came] == [b"100", b"0", b"50"]


# ── what goes wrong ──────────────────────────────────────────────────────────────────────────────


def launch(*arguments: str, stderr: int = subprocess.PIPE) -> subprocess.Popen[bytes]:
    return subprocess.Popen(
        [sys.executable, "-m", "replay", "send", *arguments], stdout=subprocess.PIPE, stderr=stderr
    )


def test_a_broker_that_comes_back_gets_everything(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    messages = numbered(400, apart=0.01)
    path = record(tmp_path / "a.jsonl", messages)
    server = mosquitto()
    with Client(server.port, "away", clean=False) as away:
        away.subscribe("line/#")
    with Client(server.port) as watcher:
        watcher.subscribe("line/#")
        process = launch(path, *at(server.port), "--json")
        watcher.wait_for(lambda ms: len(ms) >= 50, while_=lambda: process.poll() is None)
        server.stop()  # in order, so that it keeps what the absent one has to get
    server.start()
    out, err = process.communicate(timeout=TIMEOUT)
    assert process.returncode == 0, err
    report = json.loads(out)
    assert report["messages"] == 400
    assert report["reconnects"] >= 1
    with Client(server.port, "away", clean=False) as back:
        came = back.wait_for(lambda ms: len({m.payload for m in ms}) == 400)
    # At least once, and in order but for what was sent again.
    assert list(dict.fromkeys(m.payload for m in came)) == [m.payload for m in messages]


def test_a_broker_that_stays_away_is_said_with_how_far_it_came(
    broker: Broker, send: Send, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(command, "Sender", partial(sending.Sender, patience=0.3))
    path = record(tmp_path / "a.jsonl", numbered(10_000, apart=0.01))
    watcher = Client(broker.port).connect()
    watcher.subscribe("line/#")

    def pull_the_plug() -> None:
        watcher.wait_for(lambda ms: len(ms) >= 20)
        broker.kill()

    thread = threading.Thread(target=pull_the_plug)
    thread.start()
    status, out, err = send(path, *at(broker.port), "--json")
    thread.join()
    watcher.disconnect()
    assert status == 1
    report = json.loads(out)
    assert 20 <= report["messages"] <= report["line"] < 10_000
    assert f"the broker at {HOST}:{broker.port} has taken nothing for 0.3 s" in err
    assert f"taken over {report['messages']:,} messages" in err
    assert f"{path}:{report['line']}" in err


def test_a_message_that_the_broker_hangs_up_over_is_not_sent_for_ever(
    mosquitto: Callable[..., Mosquitto],
) -> None:
    server = mosquitto(max_packet_size=5000)
    sender = sending.Sender(HOST, server.port, None, None, lambda: None, patience=1.0)
    sender.connect()
    sender.publish("line/n", b"x" * 10_000, retain=False)
    with pytest.raises(sending.SendingError, match=r"has taken nothing for 1 s"):
        sender.finish()


def test_no_broker_is_said_at_once(send: Send, tmp_path: Path) -> None:
    port = free_port()
    status, out, err = send(record(tmp_path / "a.jsonl", numbered(1, 1.0)), *at(port))
    assert (status, out) == (1, "")
    assert err == (
        f"driftbell-replay send: no broker answers at {HOST}:{port} (Connection refused): "
        "is it running, and on that port?\n"
    )


def test_an_unknown_host_is_said(send: Send, tmp_path: Path) -> None:
    path = record(tmp_path / "a.jsonl", numbered(1, 1.0))
    status, _, err = send(path, "--broker", "no.such.host.invalid:1883")
    assert status == 1
    assert "no broker answers at no.such.host.invalid:1883" in err


def test_credentials(mosquitto: Callable[..., Mosquitto], send: Send, tmp_path: Path) -> None:
    users = tmp_path / "users"
    users.touch(0o600)
    subprocess.run(["mosquitto_passwd", "-b", users, "line", "correct horse"], check=True)
    server = mosquitto(allow_anonymous="false", password_file=users)
    path = record(tmp_path / "a.jsonl", numbered(3, 0.0))
    right, wrong = tmp_path / "right", tmp_path / "wrong"
    right.write_text("correct horse\n")
    wrong.write_text("battery staple")
    who = [path, *at(server.port), "--username", "line", "--password-file"]
    assert send(*who, str(right))[0] == 0
    for arguments, hint in (
        ([*who, str(wrong)], "are --username and what --password-file holds right?"),
        ([path, *at(server.port)], "give --username"),
    ):
        status, out, err = send(*arguments)
        assert (status, out) == (1, "")
        assert f"the broker at {HOST}:{server.port} refused the connection: Not authorized" in err
        assert hint in err
        assert "horse" not in err
        assert "staple" not in err


def test_control_c_ends_it_in_order(broker: Broker, client: Client, tmp_path: Path) -> None:
    path = record(tmp_path / "a.jsonl", numbered(10_000, apart=0.01))
    client.subscribe("line/#")
    process = launch(path, *at(broker.port), "--json")
    client.wait_for(lambda ms: len(ms) >= 10, while_=lambda: process.poll() is None)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=TIMEOUT)
    assert process.returncode == 1
    taken = json.loads(out)["messages"]
    came = client.wait_for(lambda ms: len(ms) == taken)
    assert [m.payload for m in came] == [b"%d" % n for n in range(taken)]
    assert err.decode() == (
        f"driftbell-replay send: stopped: the broker has taken over {taken:,} messages; "
        f"the last one sent stands at {path}:{taken}\n"
    )


def test_progress_is_shown_on_a_terminal_and_taken_away(
    broker: Broker, client: Client, tmp_path: Path
) -> None:
    path = record(tmp_path / "a.jsonl", numbered(10_000, apart=1.0))
    leader, follower = pty.openpty()
    process = launch(path, *at(broker.port), stderr=follower)
    os.close(follower)
    shown = b""
    while b", arrived 2020-01-02T03:00:0" not in shown:
        assert select.select([leader], [], [], TIMEOUT)[0]
        shown += os.read(leader, 4096)
    process.send_signal(signal.SIGTERM)
    process.communicate(timeout=TIMEOUT)
    shown += os.read(leader, 4096)
    os.close(leader)
    assert process.returncode == 1
    assert f"\r\x1b[K{path}: 1".encode() in shown  # 1 %, or more of a short file
    assert b"\r\x1b[Kdriftbell-replay send: stopped" in shown


@pytest.mark.parametrize(
    ("arguments", "why"),
    [
        (["--speed", "0"], "--speed 0: write a number above 0, such as 10, or max"),
        (["--speed", "inf"], "--speed inf: write a number above 0"),
        (["--speed", "fast"], "--speed fast: write a number above 0"),
        (["--broker", "localhost:x"], "is not HOST:PORT: write localhost:1883"),
        (["--password-file", "x"], "--password-file goes with --username"),
    ],
)
def test_a_wrong_command_line_is_2_and_says_what_to_write(
    send: Send, tmp_path: Path, arguments: list[str], why: str
) -> None:
    path = record(tmp_path / "a.jsonl", numbered(1, 1.0))
    status, out, err = send(path, *at(free_port()), *arguments)
    assert (status, out) == (2, "")
    assert why in err


def test_a_table_is_no_message(send: Send, tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("value\n1\n")
    status, _, err = send(str(tmp_path / "a.csv"), *at(free_port()))
    assert status == 2
    assert "a.csv is a table of readings, and a broker takes messages" in err


@pytest.mark.parametrize("content", [None, b"", b"\n", b"\xff", b"x" * 70_000])
def test_a_password_file_that_will_not_do(
    send: Send, tmp_path: Path, content: bytes | None
) -> None:
    if content is not None:
        (tmp_path / "secret").write_bytes(content)
    path = record(tmp_path / "a.jsonl", numbered(1, 1.0))
    who = ["--username", "line", "--password-file", str(tmp_path / "secret")]
    status, _, err = send(path, *at(free_port()), *who)
    assert status == 1
    assert "--password-file" in err
    assert "secret" not in err


def test_a_recording_that_cannot_be_read_is_1(send: Send, tmp_path: Path) -> None:
    status, _, err = send(str(tmp_path / "none.jsonl"), *at(free_port()))
    assert status == 1
    assert "none.jsonl" in err
