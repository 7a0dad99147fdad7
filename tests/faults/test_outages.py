"""Outages at random while windows open and close by themselves: live equals replay.

The long form: ``pytest -m long tests/faults``.
"""

from __future__ import annotations

import contextlib
import itertools
import random
import signal
import threading
import time
from pathlib import Path
from typing import Any

import pytest
from brokers import Broker, Client
from cable import Cable
from daemons import CONFIGURATION, until, weighing
from faulty import (
    TORQUE,
    Faulty,
    Published,
    Watcher,
    check_complete,
    faulty,
)

from monitor.journal import open_reader
from monitor.times import SECOND


def windowed() -> dict[str, object]:
    """Both characteristics in windows of a second; a burst may start an alert, the next end it."""
    characteristics: Any = CONFIGURATION["characteristics"]
    detectors = [
        {"kind": "shewhart", "chart": "mean", "width": 1},
        {"kind": "cusum", "k": 0.5, "h": 2},
    ]
    changed = {
        name: {**each, "subgroup": {"window": "1s", "min_size": 2}, "detectors": detectors}
        for name, each in characteristics.items()
    }
    alerts = {"off_delay": "1s", "rejoin": "1s"}
    return {**CONFIGURATION, "alerts": alerts, "characteristics": changed}


class Line:
    """Weighs jars and closes caps in bursts; all that it sent is in ``sent``."""

    def __init__(self, client: Client, chance: random.Random) -> None:
        self.sent: Published = []
        self._client = client
        self._chance = chance
        self._number = 0
        self._shifts = itertools.cycle([8.0, -8.0, 0.0, -8.0, 8.0])

    def burst(self) -> None:
        """Some readings of some heads, of the last fraction of a second, the oldest first."""
        chance = self._chance
        now = time.time_ns() // 1_000
        shift = next(self._shifts)
        ages = sorted(chance.randrange(SECOND // 2) for _ in range(chance.randrange(10, 40)))
        messages = []
        for age in reversed(ages):
            self._number += 1
            net = round(chance.gauss(340.0 + shift, 2.0), 2)
            lane = chance.choice("12")
            messages.append(weighing(self._number, now - age, net, lane, chance.randrange(1, 4)))
            if chance.random() < 0.5:
                messages.append((TORQUE, b"%.2f" % chance.gauss(2.0 + shift / 20, 0.1)))
        self._client.publish_all(messages)
        self.sent += messages


def happen(what: str, daemon: Faulty, cable: Cable, chance: random.Random) -> None:
    """An outage, over when this returns, or nothing at all."""
    # How long it lasts is what is random.
    some_time = threading.Event()
    match what:
        case "killed":
            daemon.kill()
            some_time.wait(chance.uniform(0.0, 2.0))
            daemon.online()
        case "stopped":
            assert daemon.stop() == 0
            some_time.wait(chance.uniform(0.0, 2.0))
            daemon.online()
        case "cut":
            times = len(daemon.logged("connected"))
            cable.cut()
            daemon.await_logged("connected", times + 1)
        case "stalled":
            daemon.signal(signal.SIGSTOP)
            some_time.wait(chance.uniform(0.0, 2.5))
            daemon.signal(signal.SIGCONT)


def close_windows(line: Line, daemon: Faulty) -> None:
    """Wait until windows have closed with nothing but time passing."""
    line.burst()
    daemon.await_count(len(line.sent))
    until(lambda: ticked(daemon), "a window that closes", daemon.is_running)


def ticked(daemon: Faulty) -> bool:
    """Whether a window has closed that the last readings were in: a second late, for stragglers."""
    latest = "SELECT coalesce(max(time), 0) FROM entries WHERE kind"
    return _single(daemon, f"SELECT ({latest} = 4) >= ({latest} = 0) + {SECOND}") == 1


def _single(daemon: Faulty, query: str) -> int:
    with contextlib.closing(open_reader(daemon.journal)) as db:
        found: int = db.execute(query).fetchone()[0]
        return found


@pytest.mark.parametrize("rounds", [4, pytest.param(100, marks=pytest.mark.long)])
def test_live_equals_replay(rounds: int, broker: Broker, tmp_path: Path) -> None:
    chance = random.Random(rounds)
    with (
        Watcher(broker.port) as watcher,
        Cable(broker.port) as cable,
        Client(broker.port) as client,
        faulty(tmp_path / "a", cable.port, windowed()) as daemon,
    ):
        daemon.online()
        line = Line(client, chance)
        for _ in range(rounds):
            for _ in range(chance.randrange(1, 4)):
                line.burst()
            outage = chance.choice(["killed", "stopped", "cut", "stalled", "none"])
            happen(outage, daemon, cable, chance)
            if chance.random() < 0.7:
                close_windows(line, daemon)
        for _ in range(3):
            close_windows(line, daemon)
        alerts = check_complete(daemon, watcher, line.sent)
        by_tick = _single(
            daemon,
            "SELECT count(*) FROM alerts JOIN entries ON entries.position = at WHERE kind = 4",
        )
    assert len(alerts) > by_tick > 0
