"""The outbound payloads, as types: what other programs read from us.

Knows the fields, their order, their meaning and JSON. Must not know topics' delivery, the engine's
state or a clock. Plain typed dictionaries, because a point is built for every subgroup;
``monitor.describe`` derives JSON Schema from them, and the words below a field describe it there.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Annotated, Any, Final, Literal, NotRequired, get_args
from urllib.parse import quote

import orjson
from typing_extensions import TypedDict  # of which pydantic can make schemas before Python 3.12

from monitor.plan import Chart, Direction, Priority

SCHEMA: Final = 1


class Keywords:
    """What JSON Schema can say of a value and a Python type cannot.

    Speaks pydantic's protocol for annotations without importing it: only ``describe`` needs it.
    """

    __slots__ = ("_keywords",)

    def __init__(self, **keywords: object) -> None:
        self._keywords = keywords

    def __get_pydantic_json_schema__(
        self, core: object, handler: Callable[[object], dict[str, Any]]
    ) -> dict[str, Any]:
        return {**handler(core), **self._keywords}


def _one_of(lead: str, meanings: Mapping[str, str]) -> Keywords:
    told = "; ".join(f"`{name}`: {meaning}" for name, meaning in meanings.items())
    return Keywords(enum=list(meanings), description=f"{lead} {told}.")


Version = Annotated[Literal[1], Keywords(description="The version of the messages' form.")]
CharacteristicName = Annotated[
    str, Keywords(description="The measured quantity, by its name in the configuration.")
]
Title = Annotated[str, Keywords(description="The measured quantity in words, for people.")]
StreamKeys = Annotated[
    dict[str, Annotated[str, Keywords(minLength=1)]],
    Keywords(
        description='Which stream of the characteristic, such as `{"lane": "1", "head": "4"}`; '
        "empty where the characteristic is one stream. Values are always strings."
    ),
]
Time = Annotated[
    str,
    Keywords(
        format="date-time",
        pattern=r"^[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}\.([0-9]{3}|[0-9]{6})Z$",
    ),
]
"""ISO 8601 UTC, as ``monitor.times.format_time`` writes it."""

Count = Annotated[int, Keywords(minimum=0)]
Ordinal = Annotated[int, Keywords(minimum=1)]
Spread = Annotated[float, Keywords(minimum=0)]
Digest = Annotated[str, Keywords(pattern="^[0-9a-f]{32}$")]
Unit = Annotated[
    str, Keywords(description="The characteristic's unit, such as `g`; empty where it has none.")
]
DetectorName = Annotated[
    str, Keywords(description="The detector, by its name within the characteristic.")
]
ChartName = Annotated[
    str,
    Keywords(
        enum=list(get_args(Chart)),
        description="Which statistic of a subgroup is charted. `individual`: its only reading; "
        "`moving_range`: how far that lies from the one before. `variance` is in the unit squared.",
    ),
]
StatisticName = Annotated[
    str,
    Keywords(
        enum=["upper_sum", "lower_sum", *get_args(Chart)],
        description="A CUSUM has two statistics, `upper_sum` and `lower_sum`, both 0 or more; "
        "any other detector has one, named as its chart.",
    ),
]
RuleName = Annotated[
    str,
    _one_of(
        "The decision rule.",
        {
            "outside-upper": "a point above the upper limit",
            "outside-lower": "a point below the lower limit",
            "zone-upper": "several of the last few points above an inner limit",
            "zone-lower": "several of the last few points below an inner limit",
            "run-upper": "many points in a row above the centre",
            "run-lower": "many points in a row below the centre",
            "cusum-upper": "the sum of what lies above the baseline is beyond its limit",
            "cusum-lower": "the sum of what lies below the baseline is beyond its limit",
            "ewma-upper": "the exponentially weighted average is above its upper limit",
            "ewma-lower": "the exponentially weighted average is below its lower limit",
            "session-lost": "the broker forgot what it kept for us while we were away",
            "trend-up": "many points in a row steadily rising",
            "trend-down": "many points in a row steadily falling",
            "alternation": "many points in a row going up and down by turns",
            "stratification": "many points in a row close to the centre",
            "mixture": "many points in a row away from the centre, on either side",
        },
    ),
]
Reason = Annotated[
    str,
    _one_of(
        "Why a message or reading was not used. The checks are made in this order, and the first "
        "that fails names the reason.",
        {
            "oversized": "over 256 KiB",
            "retained": "kept by the broker, so nobody knows how old it is",
            "no-topic": "no characteristic reads this topic",
            "not-json": "it cannot be parsed",
            "not-used": "`use_if` leaves it out",
            "no-stream": "a stream key is missing or neither text nor number, or there are too "
            "many streams",
            "no-value": "no value where it should be",
            "not-a-number": "the value is something else",
            "not-finite": "the value is infinite, or no number at all",
            "implausible": "the value is outside the plausible range",
            "no-time": "no time where it should be",
            "bad-time": "the time is no instant, or has no offset from UTC",
            "future": "the time is over 5 minutes past the arrival",
            "repeated": "the same reading came before",
            "late": "older than the stream's latest reading",
        },
    ),
]
EventKind = Literal["raised", "updated", "rejoined", "returned-to-normal", "withdrawn"]


class StatisticField(TypedDict):
    """The charted statistic that signalled, with the limits it was held against, in ``unit``: the
    characteristic's, or of a variance its square, such as `g²`."""

    name: StatisticName
    value: float
    """As it was held against the limits."""
    lower: float | None
    """Null where there is no limit on this side."""
    upper: float | None
    """Null where there is no limit on this side."""
    unit: Annotated[str, Keywords(description="Such as `g`; empty where there is none.")]


class SignalField(TypedDict):
    """A rule met while the alert was open: when first, and how many times since."""

    detector: DetectorName
    rule: RuleName
    time: Time
    """Event time of the subgroup that met it first."""
    count: Ordinal
    """Subgroups that met it, the first among them, up to this event."""


class SubgroupField(TypedDict):
    """One finished subgroup of a stream; statistics in the characteristic's unit."""

    number: Ordinal
    """Counts the stream's subgroups from 1; abandoned ones take no number."""
    size: Ordinal
    """Readings in it."""
    mean: float
    """Of its readings."""
    range: Spread | None
    """Largest less smallest reading; null for a single one."""
    sd: Spread | None
    """Sample standard deviation (divisor n − 1); null for a single reading."""
    first: Time
    """Event time of its first reading."""
    last: Time
    """Event time of its last reading."""


class ShiftField(TypedDict):
    """About how far the mean moved, and since when, from the stream's last 200 subgroups."""

    estimate: float
    """Signed, in ``unit``; runs some 12 % high, so say "about"."""
    unit: Unit
    onset: Time
    """The likeliest beginning."""
    onset_from: Time | None
    """It began no earlier than this; null where it may have begun before all that is looked back
    at. ``onset_from`` to ``onset_to`` holds the true beginning about nine times in ten."""
    onset_to: Time
    """It began no later than this."""


class SpecificationField(TypedDict):
    """The product's tolerance as declared; it moves no limit."""

    nominal: float | None
    """What is aimed at; null where it is not declared."""
    lower: float | None
    """The lower limit of the tolerance; null where it is not declared."""
    upper: float | None
    """The upper limit of the tolerance; null where it is not declared."""


class BaselineField(TypedDict):
    """The frozen centre and spread that the limits come from."""

    revision: Digest
    """Changes when the baseline does."""
    mean: float
    """The centre, in the characteristic's unit."""
    sigma: Spread
    """Standard deviation of single readings within a subgroup."""


class AlertEvent(TypedDict):
    """One event in the life of an alert: that something changed, or that it is over.

    One alert is open at a time for each characteristic, stream and direction; signals without a
    direction have one for each chart. Events of one alert share its ``id``. The same event may be
    delivered more than once: tell repeats by (``id``, ``sequence``).
    """

    schema: Version
    id: Digest
    """Of the alert; the same readings and configuration give the same ids, live or replayed."""
    sequence: Ordinal
    """Counts the events of one characteristic and stream from 1, without gaps: a number skipped is
    an event missed."""
    event: EventKind
    """`raised`: a rule was met; `updated`: a further rule was met; `rejoined`: one was met again
    soon after the return, under the same ``id``; `returned-to-normal`: a test of its own says that
    the condition is over; `withdrawn`: it is no longer judged, see ``reason``."""
    characteristic: CharacteristicName
    title: Title
    stream: StreamKeys
    time: Time
    """Event time: of the last reading of the subgroup it was decided at."""
    published: NotRequired[Time]
    """When it was sent to the broker, which only the sender knows: every published event has it; a
    line of the file that `driftbell-replay play --alerts` writes has not."""
    detector: DetectorName
    """`gauge` where the gauge or the way of its readings is at fault, not the process."""
    chart: ChartName | None
    """Null where the gauge is at fault."""
    rule: RuleName
    """The rule that raised the alert; ``signals`` has all of them."""
    direction: Direction | None
    """The way the process mean went; null for spread and for patterns without a side."""
    priority: Priority
    """As declared for this direction."""
    text: str
    """A sentence for people: what changed, how much, since when, and by which figures."""
    statistic: StatisticField | None
    """As it was when a rule was last met; null where the gauge is at fault."""
    signals: list[SignalField]
    """The rules met since the alert was raised, in the order they were first met."""
    subgroup: SubgroupField | None
    """The subgroup it was decided at; null where none was, as for `withdrawn`."""
    shift: ShiftField | None
    """Null where ``direction`` is."""
    specification: SpecificationField | None
    """Null where none is declared."""
    baseline: BaselineField | None
    """Null where the gauge is at fault."""
    reaction: list[str]
    """What to do, step by step, as declared for this direction."""
    caution: str
    """To be shown wherever ``reaction`` is."""
    reason: Annotated[str, Keywords(enum=["gauge-restart", "configuration"])] | None
    """Why it was withdrawn, else null. `gauge-restart`: the gauge's counter began again, and what
    it sends does not continue what it sent. `configuration`: what it was judged by has changed."""


class RowField(TypedDict):
    """One statistic of one detector at one subgroup, in the message's ``unit``; one of the variance
    in its square."""

    detector: DetectorName
    chart: ChartName
    statistic: StatisticName
    value: float
    """As it was held against the limits, before any restart."""
    centre: float
    """Where the statistic lies, on average, while nothing has changed; 0 for a CUSUM's sums."""
    lower: float | None
    """Null where there is no limit on this side."""
    upper: float | None
    """Null where there is no limit on this side."""
    rules: tuple[RuleName, ...]
    """The rules that it met at this subgroup; empty where none."""


class PointMessage(TypedDict):
    """One subgroup: its statistics, and every detector's value and limits, in ``unit``."""

    schema: Version
    characteristic: CharacteristicName
    stream: StreamKeys
    time: Time
    """Event time of its last reading."""
    number: Ordinal
    """Counts the stream's subgroups from 1; abandoned ones take no number."""
    size: Ordinal
    """Readings in it."""
    mean: float
    """Of its readings."""
    range: Spread | None
    """Largest less smallest reading; null for a single one."""
    sd: Spread | None
    """Sample standard deviation (divisor n − 1); null for a single reading."""
    unit: Unit
    rows: list[RowField]
    """In the order of the detectors; a detector that has nothing to plot here has no row."""


class OpenField(TypedDict):
    """An alert that is open now."""

    id: Digest
    """The same as in its events."""
    rule: RuleName
    """The rule that raised it."""
    direction: Direction | None
    """The way the process mean went; null where neither applies."""
    priority: Priority
    """As declared for this direction."""
    since: Time
    """Event time of the subgroup that raised it."""
    text: str
    """Its latest event's sentence for people."""


class JudgingField(TypedDict):
    """Whether the stream is watched right now; while it is not, silence means nothing."""

    judging: bool
    """Whether a change would be noticed."""
    since: Time
    """Since when it is so."""
    why: str | None
    """Why it is not watched, in words; null while it is."""


class StandingMessage(TypedDict):
    """How one stream stands: what is open, and whether anyone would notice.

    Sent when an alert's event or the judging changes, else at most once in 10 s.
    """

    schema: Version
    characteristic: CharacteristicName
    title: Title
    stream: StreamKeys
    time: Time
    """Arrival of the latest message that had been read when this was said."""
    judging: JudgingField
    open: list[OpenField]
    """What is open now, in the order it was raised."""
    subgroup: SubgroupField | None
    """The latest; null before the first."""


class ReasonField(TypedDict):
    """One thing that speaks for or against a baseline."""

    grade: Annotated[str, Keywords(enum=["refuse", "provisional", "note"])]
    """How grave it is: the gravest of all decides the verdict."""
    kind: str
    """A name for programs, such as `wander`."""
    found: str
    """What is so, in words."""
    do: str
    """What to do about it."""


class BaselineMessage(TypedDict):
    """A baseline that was learned of one stream, for people to judge.

    Sent when so many subgroups as were asked for had been gathered, and again as more are.
    """

    schema: Version
    characteristic: CharacteristicName
    title: Title
    stream: StreamKeys
    time: Time
    """Event time of the last reading it was learned from."""
    verdict: Annotated[str, Keywords(enum=["trust", "provisional", "refuse"])]
    """`provisional`: good for a beginning; `refuse`: nothing to judge by."""
    reasons: list[ReasonField]
    """The gravest first."""
    adopted: bool
    """Whether the stream is judged by it from now on, as its configuration asks for."""
    mean: float
    """The centre, in ``unit``."""
    sigma: Spread
    """Standard deviation of single readings within a subgroup."""
    sigma_between: Spread
    """Standard deviation of subgroup means beyond what ``sigma`` explains."""
    unit: Unit
    subgroups: Count
    """How many it was estimated from."""
    effective: Count
    """How many independent ones those are worth."""
    first: Time
    """Event time of the first of them."""
    last: Time
    """Event time of the last of them."""
    promise_kept: float | None
    """What part of the promised interval between false alarms is left if the estimate is among the
    unlucky tenth; null where that is too much to compute."""


class CountsField(TypedDict):
    """What was taken in and given out since the journal began."""

    messages: Count
    """MQTT messages that came."""
    readings: Count
    """Readings that were used."""
    set_aside: dict[Reason, Count]
    """Messages and readings that were not used, by reason; only reasons that occurred."""
    subgroups: Count
    """Finished subgroups."""
    abandoned: Count
    """Subgroups given up unfinished, because a gap broke them."""
    missing: Count
    """Readings that never came, by the gaps in their sequence numbers."""
    alerts: Count
    """Alert events."""


class HealthMessage(TypedDict):
    """What the daemon says of itself, every 10 s and when its connection changes.

    The broker sends the last one in our place (``online`` false, most fields null) when we are gone
    without a word.
    """

    schema: Version
    online: bool
    """True only once subscribed: from then on readings reach us."""
    time: Time
    """When it was said; if the broker says it for us, when we connected, not when we were lost."""
    next_by: Time | None
    """Expect the next by then; if none comes, trust ``online`` no more. Null while not online."""
    since: Time | None
    """Since when ``online`` is as it is; null where the broker says it for us."""
    counts: CountsField | None
    lag: float | None
    """Seconds from the latest reading's own time to its arrival; null before the first that has
    a time of its own."""
    waiting: Count | None
    """Alert events that the broker has not acknowledged yet."""
    last_error: str | None
    """The latest trouble in words, also after it is over."""
    qos_0: Count | None
    """Messages that came at QoS 0 since the daemon started: such are lost while we are away."""
    sessions_lost: Count | None
    """How often, since the journal began, the broker had forgotten what it kept for us while we
    were away."""
    points_dropped: Count | None
    """Points not sent since the daemon started, because the broker took them too slowly."""


class ExampleField(TypedDict):
    """One message that was set aside."""

    characteristic: str | None
    """Whose it would have been; null where none reads it."""
    topic: str
    """Where it came."""
    payload: Annotated[str, Keywords(maxLength=200)]
    """Its first 200 characters; what is not UTF-8 is shown as U+FFFD."""
    time: Time
    """Its arrival."""


class SetAsideMessage(TypedDict):
    """How often a reason has kept messages or readings out, with the latest example.

    The first of a reason is said at once, then at most once in 10 s for each reason.
    """

    schema: Version
    reason: Reason
    count: Ordinal
    """Since the journal began."""
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
    """A stream's topic levels: the characteristic, then its values percent-encoded, keys sorted."""
    return "/".join([characteristic, *(quote(value, safe="") for _, value in stream)])
