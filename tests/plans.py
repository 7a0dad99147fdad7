"""Plans, entries and readings for tests of the engine, in as few words as a test needs.

Knows the plan's types. A test says what matters to it; all else is a plain gauge: JSON with value,
time and sequence, single readings, mean 0 and sigma 1.
"""

from __future__ import annotations

import json
from collections.abc import Iterable

from monitor.detectors import Detector, Signal, detector
from monitor.engine import Engine
from monitor.entries import Entry, Message
from monitor.messages import AlertEvent
from monitor.outputs import Alert, Output, Points, SetAside
from monitor.plan import (
    BaselinePlan,
    ByCount,
    ByDirection,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    Judgement,
    Plan,
    RulePlan,
    Scheme,
    SequencePlan,
    ShewhartPlan,
    Side,
    SourcePlan,
    Specification,
)
from monitor.subgroups import Subgroup
from monitor.times import SECOND

START = 1_772_433_672 * SECOND
"""2026-03-02T06:41:12Z, in microseconds: when the tests' readings begin."""

TOPIC = "line/gauge"

GAUGE = SourcePlan(
    topic=TOPIC,
    captures=(),
    payload="json",
    value=("v",),
    time=("t",),
    sequence=SequencePlan(("n",)),
)
"""``{"v": value, "t": epoch seconds, "n": sequence}``."""


def shewhart(
    *rules: RulePlan,
    chart: Chart = "individual",
    width: float = 3.0,
    direction: Side = "both",
    exact: bool = False,
) -> ShewhartPlan:
    """A Shewhart chart, with the rule ``outside`` where none is given."""
    outside = (RulePlan("outside", width=width),)
    return ShewhartPlan(chart, width, rules or outside, direction, exact)


def characteristic(
    *schemes: Scheme,
    name: str = "weight",
    title: str = "Net weight, 340 g jar",
    unit: str = "g",
    source: SourcePlan = GAUGE,
    size: int = 1,
    max_gap: int | None = None,
    mean: float = 0.0,
    sigma: float = 1.0,
    sigma_between: float = 0.0,
    off_delay: int = 0,
    rejoin: int = 60 * SECOND,
    reaction: tuple[str, ...] = (),
    specification: Specification | None = None,
) -> CharacteristicPlan:
    """A characteristic whose detectors are named as their kinds, numbered from the second on."""
    kinds = {ShewhartPlan: "shewhart", CusumPlan: "cusum", EwmaPlan: "ewma"}
    detectors: list[DetectorPlan] = []
    for scheme in schemes or (shewhart(),):
        kind = kinds[type(scheme)]
        earlier = sum(d.kind == kind for d in detectors)
        called = f"{kind}-{earlier + 1}" if earlier else kind
        detectors.append(DetectorPlan(called, kind, scheme, f"revision of {called}"))
    return CharacteristicPlan(
        name=name,
        title=title,
        unit=unit,
        source=source,
        subgroup=ByCount(size, max_gap),
        judgement=Judgement(
            BaselinePlan(mean, sigma, sigma_between, "revision of the baseline"), tuple(detectors)
        ),
        priority=ByDirection("medium", "high", "low"),
        reaction=ByDirection(reaction, reaction, reaction),
        off_delay=off_delay,
        rejoin=rejoin,
        specification=specification,
    )


def engine(*characteristics: CharacteristicPlan, points: bool = True) -> Engine:
    """An engine that has folded nothing yet."""
    return Engine(Plan(characteristics), points=points)


def message(payload: object, second: float = 0.0, topic: str = TOPIC) -> Message:
    """A message that arrives ``second`` seconds after the start; bytes stay as they are."""
    encoded = payload if isinstance(payload, bytes) else json.dumps(payload).encode()
    return Message(START + round(second * SECOND), topic, encoded)


def reading(value: object, second: float, number: int, **more: object) -> Message:
    """A reading of ``GAUGE`` taken ``second`` seconds after the start, arriving at once."""
    taken = START / SECOND + second
    return message({"v": value, "t": taken, "n": number, **more}, second)


def readings(values: Iterable[float]) -> list[Message]:
    """A reading a second, numbered from 0."""
    return [reading(value, i, i) for i, value in enumerate(values)]


def fold(into: Engine, entries: Iterable[Entry]) -> list[Output]:
    """All outputs that the entries cause."""
    return [output for entry in entries for output in into.fold(entry)]


def events(outputs: Iterable[Output]) -> list[AlertEvent]:
    """The alert events among outputs."""
    return [output.event for output in outputs if isinstance(output, Alert)]


def points(outputs: Iterable[Output]) -> list[Points]:
    """The points among outputs."""
    return [output for output in outputs if isinstance(output, Points)]


def reasons(outputs: Iterable[Output]) -> list[str]:
    """Why what was set aside was set aside."""
    return [output.reason for output in outputs if isinstance(output, SetAside)]


def kinds(alerts: Iterable[AlertEvent]) -> list[str]:
    """The kinds of alert events."""
    return [alert["event"] for alert in alerts]


def subgroup(*values: float, number: int = 1, broken: bool = False) -> Subgroup:
    """A subgroup of the given values."""
    mean = sum(values) / len(values)
    at = START + number * SECOND
    return Subgroup(number, values, at, at, (number, at, None, None), broken, len(values), mean)


def fresh(
    scheme: Scheme, mean: float = 0.0, sigma: float = 1.0, sigma_between: float = 0.0
) -> Detector:
    """A detector that has seen nothing."""
    baseline = BaselinePlan(mean, sigma, sigma_between, "revision of the baseline")
    return detector(DetectorPlan("it", "any", scheme, "revision"), baseline)


def steps(judge: Detector, values: Iterable[float]) -> list[tuple[Signal, ...]]:
    """What a detector signals at each of single readings."""
    return [judge.step(subgroup(value, number=i + 1)) for i, value in enumerate(values)]


def rules(signals: Iterable[Signal]) -> list[str]:
    """The names of the rules that were met."""
    return [signal.rule for signal in signals]
