"""The resolved plan: what each characteristic is, how it is read, grouped, judged and answered.

Knows plain frozen data only. Must not know YAML, pydantic, files or MQTT: everything below the
configuration takes these objects, and two equal plans always behave alike.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Generic, Literal, TypeVar

T = TypeVar("T")

Stream = tuple[tuple[str, str], ...]
"""(key, value) pairs sorted by key; empty where a characteristic is one stream."""

Direction = Literal["up", "down"]
Side = Literal["both", "up", "down"]
Priority = Literal["low", "medium", "high"]
Chart = Literal["mean", "range", "sd", "variance", "median", "individual", "moving_range"]


@dataclass(frozen=True, slots=True)
class SequencePlan:
    """Where the sequence number stands in a payload, and at which count it starts again from 0."""

    pointer: tuple[str, ...]
    wraps: int | None = None


@dataclass(frozen=True, slots=True)
class SourcePlan:
    """How messages become readings.

    ``topic`` is the MQTT filter with ``+`` for every captured level; ``captures`` gives
    (level index, stream key) pairs. Pointers are RFC 6901 pointers, split and unescaped.
    """

    topic: str
    captures: tuple[tuple[int, str], ...]
    payload: Literal["json", "number"]
    value: tuple[str, ...] = ()
    time: tuple[str, ...] | None = None
    sequence: SequencePlan | None = None
    stream: tuple[tuple[str, tuple[str, ...]], ...] = ()
    use_if: tuple[tuple[tuple[str, ...], tuple[object, ...]], ...] = ()
    plausible_lower: float = -1e100
    plausible_upper: float = 1e100
    expected_rate: float | None = None
    """Readings per second of the whole characteristic, all streams together."""
    expected_streams: int | None = None
    """How many streams there will be, where nobody can tell otherwise."""


@dataclass(frozen=True, slots=True)
class ByCount:
    """``size`` consecutive readings of one stream, a new start ``every`` so long (µs) where given.

    A gap between readings longer than ``max_gap`` (µs of event time) abandons what was gathered.
    """

    size: int
    max_gap: int | None = None
    every: int | None = None


@dataclass(frozen=True, slots=True)
class ByWindow:
    """All readings of one stream in a UTC-aligned ``window`` (µs), if there are ``min_size``."""

    window: int
    min_size: int = 1


SubgroupPlan = ByCount | ByWindow


@dataclass(frozen=True, slots=True)
class BaselinePlan:
    """Frozen centre and spread, in the gauge's unit; ``sigma`` is of single readings."""

    mean: float
    sigma: float
    sigma_between: float
    revision: str


@dataclass(frozen=True, slots=True)
class RulePlan:
    """One rule of a Shewhart chart; ``width`` in standard errors, unused fields at 0."""

    rule: Literal["outside", "zone", "run", "trend", "alternation", "stratification", "mixture"]
    width: float = 0.0
    count: int = 0
    of: int = 0
    length: int = 0


@dataclass(frozen=True, slots=True)
class ShewhartPlan:
    """Shewhart chart; rules in the order they are tried (the first met names the alert).

    ``exact`` is of charts of spread (a variance's are always so): each limit is crossed as often as
    a normal statistic crosses ``width`` standard errors, rather than lying so far from the centre.
    """

    chart: Chart
    width: float
    rules: tuple[RulePlan, ...]
    direction: Side = "both"
    exact: bool = False


@dataclass(frozen=True, slots=True)
class CusumPlan:
    """Tabular CUSUM; ``k`` and ``h`` in standard errors, ``head_start`` a fraction of ``h``.

    On chart ``variance``, where nothing is clipped, they are multiples of the baseline's variance:
    with direction ``both`` of the upper sum, ``k_lower`` and ``h_lower`` being the lower sum's, for
    subgroups of ``size`` (a subgroup of n counts (n − 1)/(size − 1) times).
    """

    chart: Chart
    k: float
    h: float
    head_start: float = 0.0
    clip: float | None = None
    hold: bool = False
    direction: Side = "both"
    k_lower: float | None = None
    h_lower: float | None = None
    size: int | None = None

    def sums(self) -> list[tuple[Literal["upper_sum", "lower_sum"], float, float]]:
        """The sums that are watched, with the k and h of each."""
        k = self.k if self.k_lower is None else self.k_lower
        h = self.h if self.h_lower is None else self.h_lower
        watched: list[tuple[Literal["upper_sum", "lower_sum"], float, float]] = []
        if self.direction != "down":
            watched.append(("upper_sum", self.k, self.h))
        if self.direction != "up":
            watched.append(("lower_sum", k, h))
        return watched


@dataclass(frozen=True, slots=True)
class EwmaPlan:
    """EWMA with weight ``lam``; limits at ``width`` of its own standard error."""

    chart: Chart
    lam: float
    width: float
    asymptotic: bool = False
    clip: float | None = None
    hold: bool = False
    direction: Side = "both"


Scheme = ShewhartPlan | CusumPlan | EwmaPlan


@dataclass(frozen=True, slots=True)
class Intent:
    """What a detector was asked to do, which its scheme was worked out from.

    ``interval``: subgroups of the whole characteristic between this detector's false alarms, while
    its mean is off by up to ``ignore``. ``size``: readings in a usual subgroup. ``catch`` and
    ``ignore`` in the gauge's unit, ``catch_ratio`` times the usual spread; a Shewhart chart has
    neither ``catch`` nor ``catch_ratio``: it takes what the interval leaves it.
    """

    kind: Literal["shewhart", "cusum", "ewma"]
    chart: Chart
    interval: float
    size: int
    catch: float | None = None
    ignore: float = 0.0
    catch_ratio: float | None = None
    direction: Side = "both"
    head_start: float = 0.0
    clip: float | None = None
    hold: bool = False
    asymptotic: bool = False


@dataclass(frozen=True, slots=True)
class DetectorPlan:
    """A named detector; ``revision`` is its decision revision (contract, section 4, ``id``).

    ``intent`` is None where the scheme itself was written down.
    """

    name: str
    kind: str
    scheme: Scheme
    revision: str
    intent: Intent | None = None


@dataclass(frozen=True, slots=True)
class DeclaredDetector:
    """A detector as declared, for baselines that are still to come.

    ``decides`` is the canonical JSON of all that its revision hashes beside the baseline.
    """

    name: str
    kind: str
    given: Intent | Scheme
    decides: str


@dataclass(frozen=True, slots=True)
class ByDirection(Generic[T]):
    """What is declared for a rise, a fall, and for signals that have no side."""

    up: T
    down: T
    other: T

    def of(self, direction: Direction | None) -> T:
        """The value for ``direction``; None is a spread or pattern signal."""
        if direction == "up":
            return self.up
        return self.down if direction == "down" else self.other


@dataclass(frozen=True, slots=True)
class Specification:
    """Tolerance of the product, shown beside an alert; it never moves a limit."""

    nominal: float | None = None
    lower: float | None = None
    upper: float | None = None


@dataclass(frozen=True, slots=True)
class Judgement:
    """What a stream is held against, and by which detectors."""

    baseline: BaselinePlan
    detectors: tuple[DetectorPlan, ...]


@dataclass(frozen=True, slots=True)
class LearnPlan:
    """A baseline is proposed for each stream once it had so many ``subgroups``, over so long (µs).

    ``adopt``: one that may be trusted is judged by from then on, with ``detectors``.
    """

    subgroups: int
    over_at_least: int
    adopt: bool
    detectors: tuple[DeclaredDetector, ...]


@dataclass(frozen=True, slots=True)
class CharacteristicPlan:
    """One characteristic; durations in microseconds of event time."""

    name: str
    title: str
    unit: str
    source: SourcePlan
    subgroup: SubgroupPlan
    judgement: Judgement | None
    """Of the streams that have none of their own; None: those are not judged."""
    priority: ByDirection[Priority]
    reaction: ByDirection[tuple[str, ...]]
    off_delay: int
    rejoin: int
    specification: Specification | None = None
    resolution: float | None = None
    """The gauge's smallest step, for the advice of ``check``; None where nobody said."""
    by_stream: Mapping[Stream, Judgement] = field(default_factory=dict)
    learn: LearnPlan | None = None

    def judgement_of(self, stream: Stream) -> Judgement | None:
        """The stream's own judgement, else the common one; None where it has neither."""
        return self.by_stream.get(stream, self.judgement)

    def example(self) -> tuple[Stream | None, Judgement | None]:
        """The common judgement, or that of the first stream: all have the same detectors. None
        where every baseline is still to be learned."""
        if self.judgement is not None:
            return None, self.judgement
        return next(iter(self.by_stream.items()), (None, None))


@dataclass(frozen=True, slots=True)
class Judged:
    """A stream that is judged: of which characteristic, against which baseline."""

    plan: CharacteristicPlan
    stream: Stream
    baseline: BaselinePlan


@dataclass(frozen=True, slots=True)
class Plan:
    """All that the engine needs."""

    characteristics: tuple[CharacteristicPlan, ...]

    def topics(self) -> frozenset[str]:
        """The filters to subscribe to."""
        return frozenset(each.source.topic for each in self.characteristics)


@dataclass(frozen=True, slots=True)
class TlsPlan:
    """Files in PEM: whose signature the broker must show, and what we show it, if anything.

    ``key`` is None where the certificate's file holds it too.
    """

    ca: str
    certificate: str | None = None
    key: str | None = None


@dataclass(frozen=True, slots=True)
class BrokerPlan:
    """How to reach the broker; ``password`` never leaves this object in a log or an error.

    ``keepalive`` and ``session_expiry`` are seconds; the latter is said in protocol 5 only.
    """

    host: str
    port: int
    client_id: str
    keepalive: int
    username: str | None = None
    password: str | None = field(default=None, repr=False)
    protocol: Literal["3.1.1", "5"] = "3.1.1"
    session_expiry: int = 7 * 86_400
    tls: TlsPlan | None = None


@dataclass(frozen=True, slots=True)
class RetentionPlan:
    """How long the journal keeps entries and alerts (µs), and how large it may become (bytes)."""

    keep: int = 30 * 86_400_000_000
    keep_alerts: int = 1_095 * 86_400_000_000
    max_size: int = 20_000_000_000


@dataclass(frozen=True, slots=True)
class Settings:
    """All that the daemon needs: the plan, and where its words come from and go to."""

    plan: Plan
    broker: BrokerPlan
    root: str
    points: bool
    journal: str
    retention: RetentionPlan = RetentionPlan()
