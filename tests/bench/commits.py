"""How long a commit takes while old rows are dropped and the journal is exported, against quiet.

One journal of 300,000 messages; 3,000 commits of ten messages each: first alone, then each dropping
twenty old rows while `driftbell export` runs again and again. Prints both medians and 99th
percentiles, and the ratio of the latter. Run by hand: `python tests/bench/commits.py`.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[2]))

from monitor.entries import Message
from monitor.journal import Batch, Journal, Pruning

COMMITS, SIZE, OLD = 3_000, 10, 300_000


def messages(count: int, start: int) -> list[Message]:
    """As the checkweigher sends them."""
    payload = b'{"t":"2026-03-02T06:41:12.300Z","n":%d,"head":4,"net":341.2,"verdict":"accept"}'
    return [
        Message(start + n, "plant/jar-line-2/checkweigher/1/reading", payload % n)
        for n in range(count)
    ]


def times(journal: Journal, pruning: Pruning | None) -> list[float]:
    """Seconds of each commit, in order of size."""
    taken = []
    for n in range(COMMITS):
        batch = Batch(messages(SIZE, OLD + n), pruning=pruning)
        began = time.perf_counter()
        journal.commit(batch)
        taken.append(time.perf_counter() - began)
    return sorted(taken)


def main() -> None:
    """Measure and print."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "j.db"
        journal = Journal(path)
        journal.commit(Batch(messages(OLD, 0)))
        quiet = times(journal, None)
        export = f'while :; do "{sys.executable}" -m monitor export "{path}" --to /dev/null; done'
        exporting = subprocess.Popen(
            ["sh", "-c", export], stderr=subprocess.DEVNULL, start_new_session=True
        )
        try:
            busy = times(journal, Pruning(OLD, 0, 2 * SIZE))
        finally:
            subprocess.run(["pkill", "-g", str(exporting.pid)], check=False)
            exporting.wait()
        journal.close()
    for name, taken in (("quiet", quiet), ("pruning and exporting", busy)):
        median, p99 = (taken[int(len(taken) * q)] * 1e3 for q in (0.5, 0.99))
        print(f"{name}: median {median:.2f} ms, 99th percentile {p99:.2f} ms")
    print(
        f"ratio of 99th percentiles: {busy[int(COMMITS * 0.99)] / quiet[int(COMMITS * 0.99)]:.2f}"
    )


if __name__ == "__main__":
    main()
