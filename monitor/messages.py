"""The outbound payloads, as types: what other programs read from us.

Knows the fields, their order and JSON. Must not know topics' delivery, the engine's state or a clock.
Plain typed dictionaries, because a point is built for every subgroup; schemas are derived from them.
"""

from __future__ import annotations

from typing import Any, Literal, TypedDict
from urllib.parse import quote

import orjson

from monitor.plan import Direction, Priority

SCHEMA = 1

EventKind = Literal["raised", "updated", "rejoined", "returned-to-normal", "withdrawn"]


class StatisticField(TypedDict):
    """The charted statistic that signalled, with the limits it was held against, in ``unit``."""

    name: str
    value: float
    lower: float | None
    upper: float | None
    unit: str


class SignalField(TypedDict):
    """A rule met while the alert was open: when first, and how many times since."""

    detector: str
    rule: str
    time: str
    count: int


class SubgroupField(TypedDict):
    """The subgroup an event was decided at."""

    number: int
    size: int
    mean: float
    range: float | None
    sd: float | None
    first: str
    last: str


class ShiftField(TypedDict):
    """About how far the mean moved, and since when; ``onset_from`` is null where the look-back ends."""

    estimate: float
    unit: str
    onset: str
    onset_from: str | None
    onset_to: str


class SpecificationField(TypedDict):
    """The product's tolerance as declared."""

    nominal: float | None
    lower: float | None
    upper: float | None


class BaselineField(TypedDict):
    """The baseline in force."""

    revision: str
    mean: float
    sigma: float


class AlertEvent(TypedDict):
    """One event in the life of an alert. ``reason`` is set for ``withdrawn`` only."""

    schema: int
    id: str
    sequence: int
    event: EventKind
    characteristic: str
    title: str
    stream: dict[str, str]
    time: str
    detector: str
    chart: str
    rule: str
    direction: Direction | None
    priority: Priority
    text: str
    statistic: StatisticField
    signals: list[SignalField]
    subgroup: SubgroupField | None
    shift: ShiftField | None
    specification: SpecificationField | None
    baseline: BaselineField
    reaction: list[str]
    caution: str
    reason: str | None


class RowField(TypedDict):
    """One statistic of one detector; ``rules`` are those that signalled at this subgroup."""

    detector: str
    chart: str
    statistic: str
    value: float
    centre: float
    lower: float | None
    upper: float | None
    rules: tuple[str, ...]


class PointMessage(TypedDict):
    """One subgroup: its statistics, and every detector's value and limits."""

    schema: int
    characteristic: str
    stream: dict[str, str]
    time: str
    number: int
    size: int
    mean: float
    range: float | None
    sd: float | None
    unit: str
    rows: list[RowField]


class OpenField(TypedDict):
    """An alert that is open now."""

    id: str
    rule: str
    direction: Direction | None
    priority: Priority
    since: str
    text: str


class JudgingField(TypedDict):
    """Whether the stream is watched right now, since when, and if not, why not."""

    judging: bool
    since: str
    why: str | None


class StandingMessage(TypedDict):
    """How one stream stands."""

    schema: int
    characteristic: str
    title: str
    stream: dict[str, str]
    time: str
    judging: JudgingField
    open: list[OpenField]
    subgroup: SubgroupField | None


class CountsField(TypedDict):
    """Since the journal began; ``set_aside`` by reason."""

    messages: int
    readings: int
    set_aside: dict[str, int]
    subgroups: int
    abandoned: int
    missing: int
    alerts: int


class HealthMessage(TypedDict):
    """What the daemon says of itself. ``online`` is true only once subscribed.

    ``lag``: seconds from the latest reading's own time to its arrival; ``waiting``: alerts the broker
    has not acknowledged; ``qos_0``: messages sent at QoS 0, which nobody keeps for us when we are away.
    """

    schema: int
    online: bool
    time: str
    next_by: str | None
    since: str | None
    counts: CountsField | None
    lag: float | None
    waiting: int | None
    last_error: str | None
    qos_0: int | None
    points_dropped: int | None


class ExampleField(TypedDict):
    """One message that was set aside; ``payload`` is cut to its first 200 characters."""

    characteristic: str | None
    topic: str
    payload: str
    time: str


class SetAsideMessage(TypedDict):
    """How many messages or readings a reason has kept out, with the latest example."""

    schema: int
    reason: str
    count: int
    example: ExampleField


def encode(message: object) -> bytes:
    """The JSON bytes (UTF-8) of any of the messages above, fields in their declared order."""
    return orjson.dumps(message)


def published(event: bytes, at: str) -> bytes:
    """An encoded alert event with its ``published`` time, which only the sender can know."""
    fields: dict[str, Any] = orjson.loads(event)
    stamped: dict[str, Any] = {}
    for name, value in fields.items():
        stamped[name] = value
        if name == "time":
            stamped["published"] = at
    return orjson.dumps(stamped)


def path(characteristic: str, stream: tuple[tuple[str, str], ...]) -> str:
    """Topic levels of a stream: the characteristic, then its values percent-encoded, keys sorted."""
    return "/".join([characteristic, *(quote(value, safe="") for _, value in stream)])
