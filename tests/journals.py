"""Journals as a daemon leaves them, made of entries alone: alerts, snapshots and bases included.

Knows the daemon's own keeper of journals. Must not know brokers, or what a test wants to see.
"""

from __future__ import annotations

import json
import math
import random
from collections.abc import Collection, Iterable, Sequence
from dataclasses import replace
from pathlib import Path

import plans

from monitor.engine import Engine
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Entry,
    Message,
    Recorded,
    Started,
    State,
    Tick,
)
from monitor.folding import fold
from monitor.health import Health
from monitor.journal import Batch, Journal
from monitor.outbox import Outbox
from monitor.plan import ByWindow, CharacteristicPlan, CusumPlan, EwmaPlan, Plan, SourcePlan
from monitor.publisher import Publisher
from monitor.recovery import remembered
from monitor.times import SECOND

WEIGHT = plans.characteristic(
    CusumPlan("mean", 0.5, 5.0, head_start=0.5),
    plans.shewhart(chart="mean"),
    plans.shewhart(chart="range"),
    source=replace(plans.GAUGE, topic="line/scale/+", captures=((2, "lane"),)),
    size=3,
    mean=340.0,
    sigma=2.0,
    sigma_between=0.3,
    off_delay=2 * SECOND,
    rejoin=20 * SECOND,
)
GLUE = replace(
    plans.characteristic(
        EwmaPlan("mean", 0.2, 2.7),
        name="glue",
        title="Glue temperature",
        unit="°C",
        source=replace(plans.GAUGE, topic="line/glue"),
        mean=165.0,
        sigma=1.0,
    ),
    subgroup=ByWindow(4 * SECOND, 2),
)
TORQUE = plans.characteristic(
    name="torque",
    title="Capping torque",
    unit="N·m",
    source=SourcePlan(topic="line/torque", captures=(), payload="number"),
    mean=2.0,
    sigma=0.1,
)
PLAN = Plan((WEIGHT, GLUE, TORQUE))
"""Two lanes weighed, in threes; windows of glue's temperature; torques without time or number."""


def day(seed: int, seconds: int = 120, plan: Plan = PLAN) -> list[Recorded]:
    """What such a line sends in two minutes: drifts, outages, late readings, ticks now and then."""
    chance = random.Random(seed)
    entries: list[Recorded] = [
        Started(plans.START),
        Configured(plans.START + 1, plan),
        Connected(plans.START + 2, False),
    ]
    now, numbers, away_until = plans.START + 3, {"1": 0, "2": 0, "glue": 0}, 0
    while now < plans.START + seconds * SECOND:
        now += chance.randrange(SECOND // 2)
        second = (now - plans.START) / SECOND
        drift = 2.0 * (math.sin(second / 9) > 0.3)
        taken = now / SECOND - chance.random() / 10
        match chance.choices(("1", "2", "glue", "torque", "tick", "away"), (8, 4, 8, 4, 2, 0.3))[0]:
            case "1" | "2" as lane:
                net = chance.gauss(340.0 + (drift if lane == "1" else 0.0) * 1.5, 2.0)
                body = {"v": net, "t": taken, "n": numbers[lane]}
                numbers[lane] += 1
                entries.append(Message(now, f"line/scale/{lane}", json.dumps(body).encode()))
            case "glue":
                late = chance.random() * 6
                body = {"v": chance.gauss(165.0 + drift / 2, 1.0), "t": taken - late, "n": 0}
                numbers["glue"] += 1
                body["n"] = numbers["glue"]
                entries.append(Message(now, "line/glue", json.dumps(body).encode()))
            case "torque":
                value = b"%.3f" % chance.gauss(2.0 + drift / 8, 0.1)
                entries.append(Message(now, "line/torque", value))
            case "tick":
                entries.append(Tick(now))
            case _:
                away_until = now + chance.randrange(9 * SECOND)
                entries += [Disconnected(now), Connected(away_until, chance.random() < 0.7)]
                now = away_until
    return entries


def write(
    path: Path,
    entries: Sequence[Recorded],
    bases: Collection[int] = (),
    *,
    dropped: int = 0,
    batch: int = 1,
) -> Path:
    """A journal of these entries with a base after each of these positions, the first ``dropped``
    entries and all older bases gone. They are committed ``batch`` at a time, or one by one; bases
    stand at the end of a batch."""
    engine = Engine(Plan(()), points=False)
    publisher = Publisher("line-2/monitor", engine, Health(), Outbox([]))
    journal = Journal(path)
    for start in range(0, len(entries), batch):
        folded = fold(engine, publisher, entries[start : start + batch], ())
        made = Batch(folded.entries, folded.alerts, clears=folded.clears)
        if start + batch in bases:
            made.remembered, made.base = remembered(engine), True
        journal.commit(made)
    journal.db.execute("DELETE FROM entries WHERE position <= ?", (dropped,))
    journal.db.execute("DELETE FROM bases WHERE position < ?", (dropped,))
    journal.close()
    return path


def resumed(state: State, points: bool = False) -> Engine:
    """The engine that remembers this."""
    engine = Engine(state.plan, points=points)
    engine.restore(state.engine, state.streams)
    return engine


def told(engine: Engine, entries: Iterable[Entry]) -> list[tuple[str, int, str]]:
    """(id, sequence, event) of all alert events that the entries cause."""
    events = plans.events(plans.fold(engine, entries))
    return [(each["id"], each["sequence"], each["event"]) for each in events]


def characteristics(plan: Plan = PLAN) -> list[CharacteristicPlan]:
    """Those of the plan."""
    return list(plan.characteristics)
