"""The daemon at work in tests: a small line to watch, what it sends, and what may be seen of it.

Knows processes, journals and logs from outside. Must not know what a test wants to see.
"""

from __future__ import annotations

import contextlib
import json
import os
import random
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterable, Iterator, Sequence
from pathlib import Path
from typing import Any

from brokers import TIMEOUT, Client, Daemon, Received, is_online

from monitor.entries import Message, Recorded
from monitor.journal import open_reader, read_entries
from monitor.times import SECOND, format_time

ROOT = "line-2/monitor"
ALERTS = f"{ROOT}/alert/#"
HEALTH = f"{ROOT}/health"

CONFIGURATION: dict[str, object] = {
    "version": 1,
    "outputs": {"root": ROOT, "points": False},
    "journal": {"path": "journal.db"},
    "alerts": {"off_delay": "5s", "rejoin": "10s"},
    "characteristics": {
        "net-weight": {
            "title": "Net weight, 340 g jar",
            "unit": "g",
            "specification": {"nominal": 340, "lower": 331, "upper": 352},
            "source": {
                "topic": "line-2/scale/{lane}/reading",
                "payload": "json",
                "value": "/net",
                "time": "/t",
                "sequence": "/n",
                "stream": {"head": "/head"},
            },
            "subgroup": {"size": 2},
            "baseline": {"mean": 340.0, "sigma": 2.0},
            "detectors": [
                {"kind": "shewhart", "chart": "mean", "width": 3},
                {"kind": "cusum", "k": 0.5, "h": 5},
            ],
            "priority": {"down": "high", "up": "medium"},
            "reaction": {"up": ["Check fill head {head} of lane {lane} for drips."]},
        },
        "cap-torque": {
            "title": "Capping torque",
            "unit": "N·m",
            "source": {"topic": "line-2/capper/torque", "payload": "number"},
            "subgroup": {"size": 1},
            "baseline": {"mean": 2.0, "sigma": 0.1},
            "detectors": [{"kind": "shewhart"}],
        },
    },
}


def with_(**sections: object) -> dict[str, object]:
    """The configuration with some of its sections replaced."""
    return {**CONFIGURATION, **sections}


def weighing(number: int, at: int, net: float, lane: str = "1", head: int = 1) -> tuple[str, bytes]:
    """(topic, payload) of one jar on the scale; ``at`` in microseconds."""
    body = {"t": format_time(at), "n": number, "head": head, "net": net}
    return f"line-2/scale/{lane}/reading", json.dumps(body).encode()


def weighings(count: int, seed: int = 1) -> list[tuple[str, bytes]]:
    """``count`` jars, ten a second, the last a moment ago: two lanes with three heads each.

    Now and then a head gives too much for a while, so that alerts come and go.
    """
    chance = random.Random(seed)
    start = int(time.time() - count / 10 - 5) * SECOND
    sent = []
    for i in range(count):
        lane, head = str(i % 2 + 1), i % 6 // 2 + 1
        drifts = (i // 600) % 6 == i % 6
        net = round(chance.gauss(345.0 if drifts else 340.0, 2.0), 2)
        sent.append(weighing(i // 2, start + i * SECOND // 10, net, lane, head))
    return sent


def recording(path: Path, messages: Iterable[tuple[str, bytes]]) -> Path:
    """The messages as a recording, as if each arrived now."""
    now = format_time(int(time.time()) * SECOND)
    with path.open("w") as file:
        for topic, payload in messages:
            line = {"time": now, "topic": topic, "payload": json.loads(payload)}
            file.write(json.dumps(line) + "\n")
    return path


def driftbell(*words: object, module: str = "monitor") -> subprocess.CompletedProcess[bytes]:
    """Run a command to its end."""
    command = [sys.executable, "-m", module, *map(str, words)]
    return subprocess.run(command, capture_output=True, timeout=TIMEOUT, check=False)


def replayed(configuration: Path, recorded: Path) -> list[dict[str, Any]]:
    """The alert events that ``driftbell-replay play`` gives for a recording."""
    alerts = recorded.with_suffix(".alerts.jsonl")
    done = driftbell("play", configuration, recorded, "--alerts", alerts, module="replay")
    assert done.returncode == 0, done.stderr.decode()
    return [json.loads(line) for line in alerts.read_bytes().splitlines()]


def events(messages: Iterable[Received]) -> list[dict[str, Any]]:
    """Alert messages as the events of a replay; what came twice counts once, as consumers do it."""
    seen: dict[tuple[str, int], dict[str, Any]] = {}
    for message in messages:
        event: dict[str, Any] = message.body
        assert event.pop("published").endswith("Z")
        known = seen.setdefault((event["id"], event["sequence"]), event)
        assert known == event, "one (id, sequence), two contents"
    return list(seen.values())


def by_stream(found: Iterable[dict[str, Any]]) -> dict[str, list[dict[str, Any]]]:
    """Alert events of each stream, in their order."""
    streams: dict[str, list[dict[str, Any]]] = {}
    for event in found:
        streams.setdefault(f"{event['characteristic']} {event['stream']}", []).append(event)
    return streams


def until(
    condition: Callable[[], Any], what: str, while_: Callable[[], bool] = lambda: True
) -> None:
    """Wait until ``condition`` holds; fails when it takes too long, or when ``while_`` is False.

    For what cannot be waited for otherwise: files that another process writes.
    """
    deadline = time.monotonic() + TIMEOUT
    while not condition():
        if not while_() or time.monotonic() > deadline:
            raise AssertionError(f"did not come: {what}")
        threading.Event().wait(0.02)


class Launched(Daemon):
    """A daemon that is not awaited: its broker may be absent, stopped or unwilling."""

    def __init__(
        self, folder: Path, port: int, configuration: dict[str, object] = CONFIGURATION
    ) -> None:
        folder.mkdir(exist_ok=True)
        super().__init__(folder, port, configuration)
        self.journal = folder / "journal.db"

    def launch(self, *, stderr: int | None = None) -> subprocess.Popen[bytes]:
        """Start it, and return at once."""
        with self.log.open("ab") as log:
            self.process = subprocess.Popen(
                [sys.executable, "-m", "monitor", "run", str(self.configuration)],
                stdin=subprocess.DEVNULL,
                stdout=log,
                stderr=log if stderr is None else stderr,
            )
        return self.process

    def logged(self, event: str) -> list[dict[str, Any]]:
        """The log's lines of one event so far; every line must be a JSON object."""
        text = self.log.read_text()
        lines = [json.loads(line) for line in text[: text.rfind("\n") + 1].splitlines()]
        return [line for line in lines if line["event"] == event]

    def await_logged(self, event: str, count: int = 1, **fields: object) -> dict[str, Any]:
        """Wait for the ``count``-th line of this event with these fields."""
        found: list[dict[str, Any]] = []

        def came() -> bool:
            found[:] = [x for x in self.logged(event) if x.items() >= fields.items()]
            return len(found) >= count

        until(came, f"{event} {fields} in {self.log}", self.is_running)
        return found[count - 1]

    def is_running(self) -> bool:
        """Whether the process is there."""
        return self.process is not None and self.process.poll() is None

    def entries(self) -> list[Recorded]:
        """What the journal holds, also while it is written."""
        with contextlib.closing(open_reader(self.journal)) as db:
            return list(read_entries(db))

    def journaled(self) -> list[tuple[str, bytes]]:
        """(topic, payload) of the messages in the journal."""
        return [(e.topic, e.payload) for e in self.entries() if isinstance(e, Message)]

    def count(self) -> int:
        """How many messages the journal holds."""
        return self._ask("SELECT count(*) FROM entries WHERE kind = 0")

    def waiting(self) -> int:
        """How many alerts the journal's outbox holds."""
        return self._ask("SELECT count(*) FROM outbox")

    def _ask(self, query: str) -> int:
        with contextlib.closing(open_reader(self.journal)) as db:
            result: int = db.execute(query).fetchone()[0]
            return result

    def end(self) -> None:
        """End it however it fares; harmless where it does not run."""
        if self.process is not None:
            self.process.kill()
            self.process.wait()
            self.process = None


@contextlib.contextmanager
def launched(
    folder: Path, port: int, configuration: dict[str, object] = CONFIGURATION
) -> Iterator[Launched]:
    """A daemon, launched for the time of a block."""
    daemon = Launched(folder, port, configuration)
    daemon.launch()
    try:
        yield daemon
    finally:
        daemon.end()


@contextlib.contextmanager
def started(
    folder: Path, port: int, configuration: dict[str, object] = CONFIGURATION
) -> Iterator[Launched]:
    """A daemon, subscribed when the block begins, and ended after it."""
    daemon = Launched(folder, port, configuration)
    try:
        daemon.start()
        yield daemon
    finally:
        daemon.end()


def await_health(
    client: Client, condition: Callable[[dict[str, Any]], bool], *, retained: bool = False
) -> dict[str, Any]:
    """Wait for a health message that meets the condition."""
    found: list[dict[str, Any]] = []

    def came(messages: Sequence[Received]) -> bool:
        found[:] = [m.body for m in messages if m.retained is retained and condition(m.body)]
        return bool(found)

    client.wait_for(came, HEALTH)
    return found[0]


def goes_online(message: Received) -> bool:
    """Whether this says, now, that the daemon is online."""
    return not message.retained and is_online(message)


def resident(process: subprocess.Popen[bytes]) -> int:
    """Bytes of memory the process holds."""
    pages = int(Path(f"/proc/{process.pid}/statm").read_text().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE")
