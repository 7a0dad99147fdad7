"""How much memory the engine takes with ten thousand streams, and what of a stream takes it.

    python tests/bench/memory.py [--streams 10000] [--subgroups 200]

A hundred lanes of fill heads, judged by three detectors in subgroups of five, until every stream's
look-back is full; then all heads shift, so that every stream has an alert open. Resident memory is
that of this process, whose interpreter and libraries are counted first. Takes a minute or two.
"""

from __future__ import annotations

import argparse
import gc
import random
import sys
import tempfile
from collections import Counter
from pathlib import Path
from time import perf_counter
from types import FunctionType, ModuleType

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))

from monitor import plan as plans  # noqa: E402
from monitor.configuration.resolve import read_settings  # noqa: E402
from monitor.engine import Engine  # noqa: E402
from monitor.entries import Parsed  # noqa: E402
from monitor.stream import StreamState  # noqa: E402
from monitor.times import SECOND  # noqa: E402

START = 1_772_431_200 * SECOND  # 2026-03-02T06:00Z
LANES = 100
SIZE = 5
MEAN, SIGMA = 341.2, 1.9
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
    subgroup: {size: 5, max_gap: 30s}
    baseline: {mean: 341.2, sigma: 1.9}
    detectors:
      - {kind: shewhart, width: 5}
      - {kind: cusum, k: 0.5, h: 14}
      - {kind: ewma, lambda: 0.1, width: 5}
"""
_SHARED = (type, ModuleType, FunctionType, *(t for t in vars(plans).values() if type(t) is type))


class Line:
    """Readings of all streams, one subgroup of each after another."""

    def __init__(self, streams: int) -> None:
        self._streams = streams
        self._round = 0
        self._numbers = [0] * LANES
        self._chance = random.Random(1)

    def feed(self, engine: Engine, subgroups: int, shift: float) -> None:
        """As many subgroups of every stream, ``shift`` grams off the baseline."""
        gauss = self._chance.gauss
        for _ in range(subgroups):
            for stream in range(self._streams):
                lane, head = stream % LANES, stream // LANES
                topic = f"plant/jar-line-2/checkweigher/{lane}/reading"
                for place in range(SIZE):
                    now = START + (self._round * SIZE + place) * SECOND
                    self._numbers[lane] += 1
                    net = round(gauss(MEAN + shift, SIGMA), 1)
                    reading = {
                        "t": now / SECOND,
                        "n": self._numbers[lane],
                        "head": head,
                        "net": net,
                    }
                    engine.fold(Parsed(now, topic, reading))
            self._round += 1


def resident() -> int:
    """Bytes of this process that are in memory."""
    gc.collect()
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return pages * 4096


def parts(state: StreamState) -> Counter[str]:
    """Bytes of a stream, by the attribute that holds them; plans are shared and do not count."""
    found: Counter[str] = Counter()
    known: set[int] = set()
    for name in StreamState.__slots__:
        found[name] = _deep(getattr(state, name), known)
    found["itself"] = sys.getsizeof(state)
    return found


def _deep(value: object, known: set[int]) -> int:
    if id(value) in known or isinstance(value, _SHARED) or type(value) is bool or value is None:
        return 0
    known.add(id(value))
    return sys.getsizeof(value) + sum(_deep(each, known) for each in gc.get_referents(value))


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--streams", type=int, default=10_000)
    parser.add_argument("--subgroups", type=int, default=200)
    args = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        config = Path(folder) / "line.yaml"
        config.write_text(CONFIG)
        engine = Engine(read_settings(config, {}).plan, points=False)
    started, before = perf_counter(), resident()
    line = Line(args.streams)
    line.feed(engine, args.subgroups, 0.0)
    watching = resident()
    quiet = sum(not state.alerts.open() for state in engine.streams() if state.alerts)
    line.feed(engine, 5, 4 * SIGMA)
    ringing = resident()
    states = engine.streams()
    if len(states) != args.streams or not all(s.alerts and s.alerts.open() for s in states):
        raise SystemExit("not every stream has an alert open")
    seconds = perf_counter() - started
    megabyte = 1e6
    print(f"{args.streams:,} streams of {args.subgroups} subgroups, {seconds:.0f} s")
    print(f"  interpreter and libraries  {before / megabyte:7.1f} MB")
    print(f"  watching, {quiet:,} in control  {watching / megabyte:7.1f} MB in all")
    print(f"  every stream ringing       {ringing / megabyte:7.1f} MB in all")
    print(f"  a stream                   {(watching - before) / args.streams / 1e3:7.2f} kB")
    print("bytes of a stream that rings, by what holds them")
    for name, size in parts(states[0]).most_common():
        print(f"  {name:<26} {size:7,}")


if __name__ == "__main__":
    main()
