"""The disk is slow, full, or takes no larger file: nothing is acknowledged that is not durable.

The long form: ``pytest -m long tests/faults``.
"""

from __future__ import annotations

import os
import re
import resource
import signal
import subprocess
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
import slow_disk
from brokers import Client, Mosquitto
from daemons import until, weighings
from faulty import (
    Faulty,
    Feed,
    Published,
    Watcher,
    check_complete,
    check_same_as_published,
    faulty,
    single,
)

MEGABYTE = 1 << 20
PING = "Received PINGREQ from driftbell-test"
ALIVE = {"keepalive": "1s"}


@pytest.fixture(params=[48])
def small_disk(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[Path]:
    """A file system of so many megabytes in memory; who cannot mount one has the test skipped."""
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", f"size={request.param}m", "tmpfs", folder]
    if os.geteuid() or subprocess.run(mount, capture_output=True, check=False).returncode:
        pytest.skip("a small disk takes root, and the right to mount")
    yield folder
    subprocess.run(["umount", "--lazy", folder], check=True)


def fill(folder: Path) -> Path:
    """A file that leaves no room at all."""
    filler = folder / "filler"
    with filler.open("wb", buffering=0) as file:
        size = MEGABYTE
        while size:
            try:
                file.write(bytes(size))
            except OSError:
                size //= 2
    return filler


def acknowledged(broker: Mosquitto) -> int:
    """How many messages the broker has the daemon's word for, by its own log."""
    return len(re.findall(r"Received PUBACK from driftbell-test", broker.log.read_text()))


def is_frozen(health: dict[str, Any]) -> bool:
    """Whether it says that nothing is acknowledged."""
    return "cannot be written" in str(health["last_error"])


def check_frozen(
    daemon: Faulty, watcher: Watcher, broker: Mosquitto, published: Published, since: str = ""
) -> None:
    """It says why in health, at most what is durable is acknowledged, and it stays so."""
    said = watcher.await_health(daemon, lambda h: is_frozen(h) and h["time"] > since)
    assert said["online"], "readings still reach us"
    # Whatever it does when it is asked to live, it acknowledges nothing.
    before = acknowledged(broker)
    pings = broker.log.read_text().count(PING)
    until(lambda: broker.log.read_text().count(PING) > pings, "a ping", daemon.is_running)
    assert acknowledged(broker) == before <= daemon.count() < len(published)


@pytest.mark.parametrize(
    ("small_disk", "killed"),
    [(48, False), (12, False), (48, True)],
    ids=["", "without-room-for-ballast", "killed-meanwhile"],
    indirect=["small_disk"],
)
def test_a_full_disk(
    killed: bool, small_disk: Path, mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    messages = weighings(6_000)
    broker = mosquitto(log_type="all")
    configuration = single(
        "net-weight", journal={"path": str(small_disk / "journal.db")}, broker=ALIVE
    )
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, configuration) as daemon,
        Client(broker.port) as line,
    ):
        daemon.journal = small_disk / "journal.db"
        daemon.online()
        line.publish_all(messages[:1_000])
        daemon.await_count(1_000)
        filler = fill(small_disk)
        line.publish_all(messages[1_000:])
        check_frozen(daemon, watcher, broker, messages)
        if killed:
            daemon.kill()
            before = watcher.last_health()["time"]
            filler.unlink()
            filler = fill(small_disk)  # also what was held back, and let go of
            daemon.online()
            check_frozen(daemon, watcher, broker, messages, before)
        filler.unlink()
        daemon.await_logged("the journal takes entries again")
        alerts = check_complete(daemon, watcher, messages)
        check_same_as_published(daemon, alerts, messages)
    assert len(alerts) > 10


def test_a_file_size_limit(mosquitto: Callable[..., Mosquitto], tmp_path: Path) -> None:
    messages = weighings(3_000)
    broker = mosquitto(log_type="all")
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight", broker=ALIVE)) as daemon,
        Client(broker.port) as line,
    ):
        process = daemon.online().process
        assert process is not None
        line.publish_all(messages[:500])
        daemon.await_count(500)
        limit = daemon.journal.with_name("journal.db-wal").stat().st_size + 20_000
        resource.prlimit(process.pid, resource.RLIMIT_FSIZE, (limit, resource.RLIM_INFINITY))
        line.publish_all(messages[500:])
        check_frozen(daemon, watcher, broker, messages)
        unlimited = resource.RLIM_INFINITY, resource.RLIM_INFINITY
        resource.prlimit(process.pid, resource.RLIMIT_FSIZE, unlimited)
        daemon.await_logged("the journal takes entries again")
        alerts = check_complete(daemon, watcher, messages)
        check_same_as_published(daemon, alerts, messages)
        assert not daemon.logged("not connected")


@pytest.mark.parametrize("count", [2_000, pytest.param(50_000, marks=pytest.mark.long)])
def test_a_slow_disk_and_a_window_of_20(
    count: int, mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    messages = weighings(count)
    broker = mosquitto(max_inflight_messages=20)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon,
    ):
        daemon.environment = slow_disk.environment(tmp_path, fsync_ms=5)
        process = daemon.online().process
        assert process is not None
        assert "slow_disk.so" in Path(f"/proc/{process.pid}/maps").read_text()
        with Feed(broker.port, messages, 5_000) as feed:
            feed.await_sent(count // 2)
            daemon.kill()
            daemon.online()
            feed.await_sent(count)
        alerts = check_complete(daemon, watcher, messages)
        check_same_as_published(daemon, alerts, messages)
        assert not daemon.logged("not connected")


def test_stopped_while_the_disk_is_full(
    small_disk: Path, mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    messages = weighings(3_000)
    broker = mosquitto()
    configuration = single(
        "net-weight", journal={"path": str(small_disk / "journal.db")}, broker=ALIVE
    )
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, configuration) as daemon,
        Client(broker.port) as line,
    ):
        daemon.journal = small_disk / "journal.db"
        process = daemon.online().process
        assert process is not None
        line.publish_all(messages[:1_000])
        daemon.await_count(1_000)
        filler = fill(small_disk)
        line.publish_all(messages[1_000:])
        watcher.await_health(daemon, is_frozen)
        daemon.signal(signal.SIGTERM)
        until(lambda: process.poll() is not None, "its end")
        assert "Traceback" not in daemon.tail()
        filler.unlink()
        daemon.online()
        alerts = check_complete(daemon, watcher, messages)
        check_same_as_published(daemon, alerts, messages)
