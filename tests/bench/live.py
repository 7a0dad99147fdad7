"""How fast the daemon drains a backlog, against a subscriber that does nothing.

    python tests/bench/live.py [--rounds 5] [--messages 60000] [--points] [--fsync-delay 5]
                               [--profile]

Each side drains the same backlog of QoS 1 messages, queued by a fresh mosquitto for a persistent
session (max_inflight_messages 1000, max_queued_messages 0, persistence off as is its default), in a
process of its own; the sides take turns. The clock of both starts when the broker logs the CONNECT,
so no start-up is in it, and stops:

- bare: paho as it comes, one acknowledgement a message: when the last one is written;
- driftbell: ``driftbell run`` as users run it, six streams, subgroups of five, Shewhart mean, CUSUM
  and EWMA, a journal with full synchronisation in the temporary folder: when the journal holds the
  last message (looked at every 5 ms), which is acknowledged in the same turn of the loop.

The ratio is bare over driftbell, the median over the rounds: 1.0 is as fast as bare. Afterwards the
daemon's own counts must say that it read and judged everything. ``--points`` also publishes every
point; ``--fsync-delay`` makes each fsync of the daemon take so many milliseconds longer, as on a
slow disk; ``--profile`` runs the daemon once more under cProfile and prints the costliest calls.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import pstats
import re
import sqlite3
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests"), str(ROOT / "tests" / "faults")]

import paho.mqtt.client as mqtt  # noqa: E402
import slow_disk  # noqa: E402
from brokers import Client, Daemon, Mosquitto  # noqa: E402
from paho.mqtt.enums import CallbackAPIVersion  # noqa: E402

from monitor.demo import line  # noqa: E402
from monitor.demo.scenes import SCENES  # noqa: E402
from monitor.times import SECOND  # noqa: E402

CLIENT_ID = "drain"
FILTER = "plant/jar-line-2/checkweigher/+/reading"
PATIENCE = 120.0  # seconds


def configuration(*, points: bool) -> dict[str, object]:
    """Three detectors with textbook constants on the demo line's checkweigher."""
    return {
        "version": 1,
        "broker": {"client_id": CLIENT_ID},
        "outputs": {"root": "plant/jar-line-2/monitor", "points": points},
        "journal": {"path": "journal.db"},
        "characteristics": {
            "net-weight": {
                "title": "Net weight, 340 g jar",
                "unit": "g",
                "source": {
                    "topic": FILTER.replace("+", "{lane}"),
                    "payload": "json",
                    "value": "/net",
                    "time": "/t",
                    "sequence": "/n",
                    "stream": {"head": "/head"},
                    "use_if": {"/verdict": ["accept", "reject"]},
                    "plausible": {"lower": 0, "upper": 1000},
                },
                "subgroup": {"size": 5, "max_gap": "30s"},
                "baseline": {"mean": 341.2, "sigma": 1.9, "sigma_between": 0.4},
                "detectors": [
                    {"kind": "shewhart", "chart": "mean", "width": 3},
                    {"kind": "cusum", "k": 0.5, "h": 5},
                    {"kind": "ewma", "lambda": 0.2, "width": 2.962},
                ],
            }
        },
    }


def backlog(count: int) -> list[tuple[str, bytes]]:
    """``count`` weighings, the last made just now: one from the future would be set aside."""
    seconds = count * line.PIECE
    start = int(time.time() - seconds) * SECOND
    weighings = line.messages(SCENES["in-control"], 1, start=start, seconds=seconds)
    return [(m.topic, m.payload) for m in weighings if "checkweigher" in m.topic]


@contextlib.contextmanager
def fresh_broker() -> Iterator[tuple[Mosquitto, Path]]:
    """A mosquitto of this round's own, and the round's folder."""
    with tempfile.TemporaryDirectory(prefix="driftbell-bench-") as name:
        folder = Path(name)
        server = Mosquitto(folder, max_inflight_messages=1000, persistence="false")
        server.start()
        try:
            yield server, folder
        finally:
            server.stop()


@dataclass(frozen=True, slots=True)
class Drain:
    """Seconds from the process's start to its CONNECT, and from there to the end."""

    startup: float
    seconds: float


def connected_at(server: Mosquitto, process: subprocess.Popen[bytes], skip: int) -> float:
    """When the broker logged the CONNECT of ``CLIENT_ID``, after ``skip`` earlier ones."""
    pattern = re.compile(rf"New client connected .* as {CLIENT_ID} ".encode())
    while len(pattern.findall(server.log.read_bytes())) <= skip:
        assert process.poll() is None, "the subscriber ended before it connected"
        time.sleep(0.001)
    return time.monotonic()


def drain_bare(messages: list[tuple[str, bytes]]) -> Drain:
    """One round of the bare subscriber."""
    with fresh_broker() as (server, _):
        with Client(server.port, CLIENT_ID, clean=False) as session:
            session.subscribe(FILTER)
        with Client(server.port) as publisher:
            publisher.publish_all(messages)
        started = time.monotonic()
        command = [sys.executable, __file__, "--bare", str(server.port), str(len(messages))]
        process = subprocess.Popen(command, stdout=subprocess.PIPE)
        connected = connected_at(server, process, skip=1)
        output, _ = process.communicate(timeout=PATIENCE)
        return Drain(connected - started, float(output) - connected)


def be_bare(port: int, count: int) -> None:
    """The bare subscriber's process: prints the monotonic clock once the last is acknowledged."""
    received = 0

    def on_message(*_: object) -> None:
        nonlocal received
        received += 1

    client = mqtt.Client(CallbackAPIVersion.VERSION2, client_id=CLIENT_ID, clean_session=False)
    client.on_message = on_message
    client.connect("127.0.0.1", port)
    while received < count:
        client.loop()  # what loop_forever does, turn by turn
    print(time.monotonic())
    client.disconnect()


def drain_driftbell(
    messages: list[tuple[str, bytes]],
    *,
    points: bool,
    fsync_delay: int,
    profile: Path | None = None,
) -> Drain:
    """One round of the daemon; AssertionError where it did not read and judge everything."""
    with fresh_broker() as (server, folder):
        daemon = Daemon(folder, server.port, configuration(points=points))
        daemon.start()  # subscribes: from now on the broker queues for its session
        daemon.stop()
        with Client(server.port) as publisher:
            publisher.publish_all(messages)
        profiled = [] if profile is None else ["-m", "cProfile", "-o", str(profile)]
        command = [sys.executable, *profiled, "-m", "monitor", "run", str(daemon.configuration)]
        environment = dict(os.environ)
        if fsync_delay:
            environment |= slow_disk.environment(folder, fsync_ms=fsync_delay)
        started = time.monotonic()
        with daemon.log.open("ab") as log:
            process = subprocess.Popen(command, stdout=log, stderr=log, cwd=ROOT, env=environment)
        try:
            connected = connected_at(server, process, skip=1)
            ended = journaled_at(folder / "journal.db", len(messages), process)
        finally:
            process.terminate()
            process.wait(PATIENCE)
        with Client(server.port) as reader:
            reader.subscribe(f"{daemon.root}/health")
            counts = reader.wait_for(bool)[-1].body["counts"]
        assert isinstance(counts, dict)
        assert counts["messages"] == counts["readings"] == len(messages), counts
        assert counts["subgroups"] == len(messages) // 5, counts
        return Drain(connected - started, ended - connected)


def journaled_at(path: Path, count: int, process: subprocess.Popen[bytes]) -> float:
    """When the journal held ``count`` messages."""
    deadline = time.monotonic() + PATIENCE
    with contextlib.closing(sqlite3.connect(f"file:{path}?mode=ro", uri=True)) as journal:
        first = "SELECT coalesce((SELECT position FROM entries WHERE kind = 0 LIMIT 1), 1e18)"
        query = f"SELECT max(position) + 1 - ({first}) FROM entries"
        while journal.execute(query).fetchone()[0] < count:
            assert process.poll() is None, "the daemon ended before it had read everything"
            assert time.monotonic() < deadline, "the daemon did not read everything"
            time.sleep(0.005)
        return time.monotonic()


def main() -> None:
    """Run the rounds and print the figures."""
    parser = argparse.ArgumentParser(description="Live drain against a bare subscriber.")
    parser.add_argument("--rounds", type=int, default=5)
    parser.add_argument("--messages", type=int, default=60_000, help="a multiple of 30")
    parser.add_argument("--points", action="store_true", help="publish every point as well")
    parser.add_argument("--fsync-delay", type=int, default=0, metavar="MS", help="a slow disk")
    parser.add_argument("--profile", action="store_true", help="print the daemon's ten costliest")
    parser.add_argument("--bare", nargs=2, type=int, help=argparse.SUPPRESS)
    args = parser.parse_args()
    if args.bare:
        be_bare(*args.bare)
        return
    drain = partial(drain_driftbell, points=args.points, fsync_delay=args.fsync_delay)
    sides: dict[str, Callable[[list[tuple[str, bytes]]], Drain]] = {
        "bare": drain_bare,
        "driftbell": drain,
    }
    drains: dict[str, list[Drain]] = {side: [] for side in sides}
    ratios = []
    for number in range(args.rounds):
        # Who goes first alternates, so that a machine that warms or tires favours neither.
        for side in list(sides)[:: 1 if number % 2 == 0 else -1]:
            drains[side].append(sides[side](backlog(args.messages)))
        bare, driftbell = (drains[side][-1].seconds for side in sides)
        ratios.append(bare / driftbell)
        print(
            f"round {number + 1}: bare {bare:.2f} s, driftbell {driftbell:.2f} s: {ratios[-1]:.2f}"
        )
    for side, rounds in drains.items():
        seconds = statistics.median(drain.seconds for drain in rounds)
        startup = statistics.median(drain.startup for drain in rounds)
        print(
            f"{side}: {seconds:.2f} s, {seconds / args.messages * 1e6:.1f} µs a message,"
            f" {args.messages / seconds:,.0f} a second (CONNECT {startup:.2f} s after its start)"
        )
    print(f"ratio: {statistics.median(ratios):.2f} ({min(ratios):.2f} to {max(ratios):.2f})")
    if args.profile:
        with tempfile.NamedTemporaryFile(suffix=".prof") as file:
            drain(backlog(args.messages), profile=Path(file.name))
            pstats.Stats(file.name).strip_dirs().sort_stats("tottime").print_stats(10)


if __name__ == "__main__":
    main()
