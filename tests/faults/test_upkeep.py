"""What is done to a journal in use: it is pruned, exported, and wanted by a second daemon.

The long form: ``pytest -m long tests/faults``.
"""

from __future__ import annotations

import contextlib
import json
from collections.abc import Callable
from pathlib import Path

import pytest
import slow_disk
from brokers import Broker, Mosquitto
from daemons import driftbell, until, weighings
from faulty import (
    SHORT_ALERTS,
    Faulty,
    Feed,
    Watcher,
    check_complete,
    check_once,
    check_same_as_published,
    command,
    faulty,
    single,
    torques,
    undisturbed,
)

from monitor.journal import open_reader

DAY = 86_400  # seconds


def export(daemon: Faulty, to: Path) -> list[bytes]:
    """The journal's lines now, without the state that they may begin with."""
    command("export", daemon.journal, "--to", to)
    lines = to.read_bytes().splitlines()
    return [line for line in lines if json.loads(line).get("control") != "state"]


def place(part: list[bytes], whole: list[bytes]) -> int:
    """Where the part ends in the whole, of which it is one piece."""
    begins = [n for n, line in enumerate(whole) if line == part[0]]
    ends = [n + len(part) for n in begins if whole[n : n + len(part)] == part]
    assert ends, "an export is no piece of what the journal held"
    return ends[0]


def oldest(daemon: Faulty) -> tuple[int, int]:
    """(position of the oldest entry, of the newest base older than is kept)."""
    with contextlib.closing(open_reader(daemon.journal)) as db:
        (first,) = db.execute("SELECT min(position) FROM entries").fetchone()
        bases = [p for (p,) in db.execute("SELECT DISTINCT position FROM bases ORDER BY 1")]
    return first, bases[-2] if len(bases) > 1 else 0


@pytest.mark.parametrize("count", [4_000, pytest.param(100_000, marks=pytest.mark.long)])
def test_pruned_and_exported_under_load(
    count: int, mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    broker = mosquitto()
    messages = torques(3 * count, broker=broker)
    configuration = single("cap-torque", alerts=SHORT_ALERTS)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, configuration) as daemon,
    ):
        # Forty days ago, then a month ago: each run begins with a base to fold again from.
        for days, begin in ((40, 0), (32, count)):
            daemon.environment = slow_disk.environment(tmp_path, clock_ahead=-days * DAY)
            daemon.online()
            with Feed(broker.port, messages[begin : begin + count], 4_000) as feed:
                feed.await_sent(count)
            daemon.await_count(begin + count)
            assert daemon.stop() == 0
        daemon.environment = {}
        old = export(daemon, tmp_path / "old.jsonl")

        daemon.online()
        pieces = []
        with Feed(broker.port, messages[2 * count :], min(2_000, count / 4)) as feed:
            while len(pieces) <= 2 or not feed.is_over:
                pieces.append(export(daemon, tmp_path / "piece.jsonl"))
                if len(pieces) == 2:
                    daemon.kill()
                    daemon.launch()
        daemon.await_online()
        until(lambda: daemon.journaled()[-count:] == feed.sent, "all of it", daemon.is_running)
        until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
        first, base = oldest(daemon)
        assert first == base > count, "it was not pruned up to the base"
        assert daemon.stop() == 0
        alerts = watcher.alerts_until_farewell()
        left = daemon.journaled()
    check_once(left, messages[-len(left) :])
    assert count < len(left) <= 2 * count

    new = export(daemon, tmp_path / "new.jsonl")
    whole = [*old[: old.index(new[0])], *new]
    ends = [place(piece, whole) for piece in pieces]
    assert ends == sorted(ends)
    recorded = tmp_path / "whole.jsonl"
    recorded.write_bytes(b"\n".join(whole) + b"\n")
    assert alerts == undisturbed(daemon.configuration, recorded)
    # What is left begins with its state, so its alerts are those that were given live.
    later = undisturbed(daemon.configuration, tmp_path / "new.jsonl")
    assert later == alerts[-len(later) :]
    # How many depends on the pace of the run, since alerts end and rejoin by the clock.
    assert 0 < len(later) < len(alerts)


def test_a_second_daemon_under_load(broker: Broker, tmp_path: Path) -> None:
    messages = weighings(30_000)
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, single("net-weight")) as daemon,
    ):
        daemon.online()
        with Feed(broker.port, messages, 3_000) as feed:
            daemon.await_count(500)
            second = driftbell("run", daemon.configuration)
            assert not feed.is_over
        assert second.returncode == 1
        assert b"another daemon holds the journal" in second.stderr
        assert not daemon.logged("not connected")
        alerts = check_complete(daemon, watcher, feed.sent)
        check_same_as_published(daemon, alerts, feed.sent)
