"""``driftbell run``: how it starts, what it logs, how it exits."""

from __future__ import annotations

import json
import os
import pty
import re
import signal
import socket
from pathlib import Path

import pytest
from brokers import Embedded
from daemons import (
    ALERTS,
    Client,
    Launched,
    driftbell,
    launched,
    started,
    weighing,
    with_,
)

from monitor.demo.broker import free_port
from monitor.times import SECOND

START = 1_772_433_672 * SECOND


@pytest.fixture
def nobody() -> int:
    """A port that nobody listens on."""
    return free_port()


def test_a_configuration_that_is_wrong_exits_2(tmp_path: Path, nobody: int) -> None:
    daemon = Launched(tmp_path / "a", nobody, with_(jurnal={"path": "x.db"}))
    done = driftbell("run", daemon.configuration)
    assert done.returncode == 2
    said = done.stderr.decode()
    assert "jurnal" in said
    assert "journal" in said
    assert "Traceback" not in said
    assert not daemon.journal.exists()
    assert driftbell("run", tmp_path / "nothing.yaml").returncode == 2
    assert driftbell("run").returncode == 2


def test_a_journal_that_cannot_be_exits_1(tmp_path: Path, nobody: int) -> None:
    (tmp_path / "file").touch()
    for path, text in (
        (tmp_path / "file" / "j.db", "Not a directory"),
        (tmp_path, "unable to open database file"),
        (Path("/proc/driftbell/j.db"), "No such file or directory"),
    ):
        daemon = Launched(tmp_path / "a", nobody, with_(journal={"path": str(path)}))
        done = driftbell("run", daemon.configuration)
        assert done.returncode == 1
        said = done.stderr.decode()
        assert str(path) in said
        assert text in said
        assert "Traceback" not in said


def test_a_second_daemon_leaves_the_first_alone(tmp_path: Path) -> None:
    server = Embedded(tmp_path)
    server.start()
    with started(tmp_path / "a", server.port) as first, Client(server.port) as client:
        second = driftbell("run", first.configuration)
        assert second.returncode == 1
        said = second.stderr.decode()
        assert f"another daemon holds the journal {first.journal}" in said
        client.subscribe(ALERTS)
        client.publish_all(weighing(n, START + n, 350.0) for n in (1, 2))
        client.wait_for(bool)
        assert first.stop() == 0
        assert len(first.logged("connected")) == 1, "the second took the connection"
    server.stop()


def test_logs_are_json_where_nobody_looks(tmp_path: Path, nobody: int) -> None:
    with launched(tmp_path / "a", nobody) as daemon:
        line = daemon.await_logged("not connected")
        assert daemon.stop() == 0
    assert line["level"] == "warning"
    assert line["why"].startswith(f"cannot reach 127.0.0.1:{nobody}: ")
    assert re.fullmatch(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d+Z", line["timestamp"])
    lines = [json.loads(each) for each in daemon.log.read_text().splitlines()]
    assert [each["event"] for each in lines if each["level"] == "info"] == [
        "starting",
        "started",
        "stopped",
    ]


def test_logs_are_readable_on_a_terminal(tmp_path: Path, nobody: int) -> None:
    ours, theirs = pty.openpty()
    daemon = Launched(tmp_path / "a", nobody)
    process = daemon.launch(stderr=theirs)
    os.close(theirs)
    seen = b""
    while b"not connected" not in seen:
        seen += os.read(ours, 4096)
    process.send_signal(signal.SIGINT)
    assert process.wait(5) == 0
    os.close(ours)
    plain = re.sub(r"\x1b\[[0-9;]*m", "", seen.decode())
    assert re.search(r"\[warning *\] not connected +.*why='?cannot reach", plain), plain
    with pytest.raises(json.JSONDecodeError):
        json.loads(plain.splitlines()[0])


@pytest.mark.parametrize("broken", ["closed", "full"])
def test_it_goes_on_where_nothing_can_be_logged(broken: str, tmp_path: Path) -> None:
    daemon = Launched(tmp_path / "a", free_port())
    if broken == "full":
        stderr = os.open("/dev/full", os.O_WRONLY)
    else:
        reader, stderr = os.pipe()
        os.close(reader)
    server = Embedded(tmp_path)
    server.start()
    daemon = Launched(tmp_path / "a", server.port)
    with Client(server.port) as client:
        client.subscribe(f"{daemon.root}/health")
        process = daemon.launch(stderr=stderr)
        client.wait_for(lambda ms: any(m.body["online"] for m in ms))
        process.send_signal(signal.SIGTERM)
        assert process.wait(5) == 0
    os.close(stderr)
    server.stop()


def test_a_host_that_has_no_address_is_tried_again(tmp_path: Path, nobody: int) -> None:
    with launched(tmp_path / "a", nobody, with_(broker={"host": "a..b"})) as daemon:
        line = daemon.await_logged("not connected", 2)
        assert line["why"].startswith(f"cannot reach a..b:{nobody}: ")
        assert daemon.stop() == 0


def test_the_name_of_the_broker_may_have_several_addresses(tmp_path: Path) -> None:
    # localhost is often ::1 too, where nobody listens.
    with socket.create_server(("127.0.0.1", 0)) as listener:
        port = listener.getsockname()[1]
        with launched(tmp_path / "a", port, with_(broker={"host": "localhost"})):
            connection, _ = listener.accept()
            with connection:
                assert connection.recv(1) == b"\x10"
