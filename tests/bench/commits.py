"""How long a commit takes while old rows are dropped and the journal is exported, against quiet.

    python tests/bench/commits.py [--rounds 15] [--commits 600] [--size 10]

One journal of old messages: as many as are going to be dropped, and 300,000 more. In each round it
takes as many commits three times over: alone; then with old rows dropped at the pace of the daemon;
then with `driftbell export` at work as well, from its first lines on, into a file on the same disk.
Between commits the log is carried over into the file, as the daemon does after publishing; that is
timed apart. Machines are noisy and others may be at work, so what is printed are medians over the
rounds, and the median of the rounds' ratios to quiet.
"""

from __future__ import annotations

import argparse
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))

from monitor import recovery  # noqa: E402
from monitor.engine import Engine  # noqa: E402
from monitor.entries import Message  # noqa: E402
from monitor.journal import Batch, Journal  # noqa: E402
from monitor.plan import Plan, RetentionPlan  # noqa: E402
from monitor.retention import Retention  # noqa: E402

KEPT = 300_000  # messages; an export of them outlasts a round
_EACH = 20  # rows dropped for a commit of few; see retention.py
PATIENCE = 30.0  # seconds
QUIET, PRUNING, EXPORTING = "quiet", "pruning", "pruning and exporting"


def messages(count: int, start: int) -> list[Message]:
    """As the checkweigher sends them, a second apart."""
    payload = b'{"t":"2026-03-02T06:41:12.300Z","n":%d,"head":4,"net":341.2,"verdict":"accept"}'
    topic = "plant/jar-line-2/checkweigher/1/reading"
    return [Message(n * 1_000_000, topic, payload % n) for n in range(start, start + count)]


def fill(journal: Journal, dropped: int) -> None:
    """First what is to go, then what exports read; a base after each."""
    engine = Engine(Plan(()), points=False)
    for part in (messages(dropped, 0), messages(KEPT, dropped)):
        for message in part:
            engine.fold(message)
        journal.commit(Batch(part, remembered=recovery.remembered(engine), base=True))
    journal.db.execute("PRAGMA wal_checkpoint(TRUNCATE)")


class Commits:
    """The daemon's part, without its engine."""

    def __init__(self, journal: Journal, size: int, old: int) -> None:
        self.journal, self.size = journal, size
        self.checkpoints: list[float] = []
        self._next = old
        self._retention = Retention(RetentionPlan(keep=KEPT * 1_000_000))
        self._retention.look(journal, old * 1_000_000)

    def times(self, count: int, *, pruning: bool) -> list[float]:
        """Milliseconds of each commit, in order of size."""
        taken = []
        for _ in range(count):
            batch = Batch(messages(self.size, self._next))
            self._next += self.size
            if pruning:
                batch.pruning = self._retention.few(self.size)
            began = time.perf_counter()
            self.journal.commit(batch)
            ended = time.perf_counter()
            self.journal.checkpoint()
            taken.append((ended - began) * 1e3)
            carried = (time.perf_counter() - ended) * 1e3
            if carried > 0.05:  # there was something to do
                self.checkpoints.append(carried)
        return sorted(taken)


@contextmanager
def exporting(path: Path) -> Iterator[None]:
    """An export that writes all the while."""
    to = path.with_name("export.jsonl")
    command = [sys.executable, "-m", "monitor", "export", str(path), "--to", str(to)]
    process = subprocess.Popen(command, cwd=ROOT, start_new_session=True)
    try:
        part = path.with_name(f".{to.name}.{process.pid}.part")
        until = time.monotonic() + PATIENCE
        while not (part.exists() and part.stat().st_size):
            if process.poll() is not None or time.monotonic() > until:
                raise SystemExit("the export did not begin")
            time.sleep(0.01)
        yield
        if process.poll() is not None:
            raise SystemExit("the export was over too soon: ask for fewer --commits")
    finally:
        process.kill()
        process.wait()
        part.unlink(missing_ok=True)


def at(taken: list[float], share: float) -> float:
    """The value that so many are not above."""
    return taken[int(len(taken) * share)]


def main() -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--rounds", type=int, default=15)
    parser.add_argument("--commits", type=int, default=600)
    parser.add_argument("--size", type=int, default=10, help="messages a commit")
    args = parser.parse_args()
    rounds: dict[str, list[list[float]]] = {QUIET: [], PRUNING: [], EXPORTING: []}
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "j.db"
        journal = Journal(path)
        dropped = 2 * args.rounds * args.commits * max(_EACH, 2 * args.size)
        fill(journal, dropped)
        commits = Commits(journal, args.size, dropped + KEPT)
        for _ in range(args.rounds):
            rounds[QUIET].append(commits.times(args.commits, pruning=False))
            rounds[PRUNING].append(commits.times(args.commits, pruning=True))
            with exporting(path):
                rounds[EXPORTING].append(commits.times(args.commits, pruning=True))
        assert journal.oldest > dropped - 1_000, "it was not dropped"
        log = path.with_name("j.db-wal").stat().st_size
        journal.close()
    for name, taken in rounds.items():
        median, p99 = (statistics.median(at(each, q) for each in taken) for q in (0.5, 0.99))
        ratio = statistics.median(
            at(each, 0.99) / at(quiet, 0.99)
            for each, quiet in zip(taken, rounds[QUIET], strict=True)
        )
        print(f"{name}: median {median:.2f} ms, 99th percentile {p99:.2f} ms, {ratio:.2f} of quiet")
    carried = statistics.median(commits.checkpoints)
    print(f"carrying the log over between commits: {carried:.1f} ms; the log has {log:,} bytes")


if __name__ == "__main__":
    main()
