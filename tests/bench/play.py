"""How fast ``driftbell-replay play`` reads a recording, against parsing its lines and nothing else.

    python tests/bench/play.py [--messages 600000] [--rounds 5]

It writes messages of six fill heads and plays them through three detectors in subgroups of five.
The ratio is the time that a bare loop over the standard module's ``json.loads`` takes for the lines
of the file, divided by that of the whole command, its start included: 1.0 is as fast as the loop.
Each round times both, one after the other, so that a busy machine slows both; the ratio of
processor time is the steadier one there.
"""

from __future__ import annotations

import argparse
import json
import random
import resource
import statistics
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path
from time import perf_counter, process_time
from typing import NamedTuple

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))

import orjson  # noqa: E402

from monitor.entries import Message  # noqa: E402
from monitor.recording_lines import write_jsonl  # noqa: E402
from monitor.times import SECOND, format_time  # noqa: E402

START = 1_772_431_200 * SECOND  # 2026-03-02T06:00Z
SPACING = SECOND // 10  # 600 pieces a minute
CONFIG = """
version: 1
broker: {host: localhost}
outputs: {root: plant/jar-line-2/monitor}
journal: {path: line.db}
characteristics:
  net-weight:
    title: Net weight, 340 g jar
    unit: g
    source:
      topic: plant/jar-line-2/checkweigher/{lane}/reading
      payload: json
      value: /net
      time: /t
      sequence: /n
      stream: {head: /head}
      use_if: {/verdict: [accept, reject]}
      plausible: {lower: 0, upper: 1000}
    subgroup: {size: 5, max_gap: 30s}
    baseline: {mean: 341.2, sigma: 1.9}
    detectors:
      - {kind: shewhart, width: 4}
      - {kind: cusum, k: 0.5, h: 10}
      - {kind: ewma, lambda: 0.1, width: 4}
"""


def messages(count: int) -> Iterator[Message]:
    """Readings in control, in turn from six heads."""
    chance = random.Random(1)
    for number in range(count):
        moment = START + number * SPACING
        reading = {
            "t": format_time(moment),
            "n": number,
            "head": number % 6 + 1,
            "net": round(chance.gauss(341.2, 1.9), 1),
            "verdict": "accept",
        }
        topic = "plant/jar-line-2/checkweigher/1/reading"
        yield Message(moment + 12_000, topic, orjson.dumps(reading))


class Times(NamedTuple):
    """Seconds: by the clock on the wall, and of the processor."""

    wall: float
    processor: float


def bare(recording: Path) -> Times:
    """A loop that parses each line and does nothing with it."""
    started, used = perf_counter(), process_time()
    with recording.open() as file:
        for line in file:
            json.loads(line)
    return Times(perf_counter() - started, process_time() - used)


def play(config: Path, recording: Path, count: int) -> Times:
    """The whole command, its start included."""
    started, used = perf_counter(), _used_by_children()
    command = [sys.executable, "-m", "replay", "play", str(config), str(recording), "--json"]
    out = subprocess.run(command, cwd=ROOT, capture_output=True, check=True).stdout
    times = Times(perf_counter() - started, _used_by_children() - used)
    if json.loads(out)["readings"] != count:
        raise SystemExit(f"not every message became a reading: {out.decode()}")
    return times


def _used_by_children() -> float:
    usage = resource.getrusage(resource.RUSAGE_CHILDREN)
    return usage.ru_utime + usage.ru_stime


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--messages", type=int, default=600_000)
    parser.add_argument("--rounds", type=int, default=5)
    args = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        config, recording = Path(folder, "line.yaml"), Path(folder, "line.jsonl")
        config.write_text(CONFIG)
        with recording.open("wb") as file:
            write_jsonl(file, messages(args.messages))
        ratios = []
        for number in range(1, args.rounds + 1):
            loop, command = bare(recording), play(config, recording, args.messages)
            ratios.append(Times(*(a / b for a, b in zip(loop, command, strict=True))))
            print(
                f"round {number}: bare loop {loop.wall:.2f} s, play {command.wall:.2f} s, "
                f"ratio {ratios[-1].wall:.2f}; processor {loop.processor:.2f} s, "
                f"{command.processor:.2f} s, ratio {ratios[-1].processor:.2f}"
            )
    for name, each in zip(Times._fields, zip(*ratios, strict=True), strict=True):
        print(f"ratio, {name}: median {statistics.median(each):.2f}, best {max(each):.2f}")


if __name__ == "__main__":
    main()
