"""What ``tune`` found, as data: everything its table, its JSON object and its report show.

Knows figures and reasons. Must not know how they were worked out or how they are shown.

Units, unless a field says otherwise: instants in integer microseconds since 1970 (UTC); durations
in seconds of running time, which leaves out pauses of the whole characteristic; levels and shifts
in the gauge's unit; constants of detectors in standard errors of the charted statistic, those of a
variance CUSUM in multiples of sigma². Intervals of uncertainty hold 90 %: 5 % lie beyond each end.
An interval between false alarms is always that of the whole characteristic, all streams together.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from monitor.baselining.moving import Moved

Kind = Literal["cusum", "ewma", "shewhart"]
Shape = Literal["step", "ramp", "spread"]
Origin = Literal["calibrated", "given", "configured"]
"""Where a setting's constants come from: worked out on the first part of the recording, given on
the command line, or standing in the configuration (then also with its baseline)."""


@dataclass(frozen=True, slots=True)
class Range:
    """From ``low`` to ``high``; ``high`` is None where nothing limits it."""

    low: float
    high: float | None


@dataclass(frozen=True, slots=True)
class Source:
    """A recording that was read: its name as given, and the SHA-256 of the file, in hex."""

    name: str
    sha256: str


@dataclass(frozen=True, slots=True)
class Part:
    """A stretch of the recording: its first and last instant, running seconds, and readings of all
    streams."""

    first: int
    last: int
    running: float
    readings: int


@dataclass(frozen=True, slots=True)
class Outline:
    """A stream in few points, for drawing: equal stretches of time that hold readings, in order.

    ``times`` is the middle of each stretch; ``mean``, ``low`` and ``high`` are the mean and the 1 %
    and 99 % points of its readings. All four have one length, at most some hundreds.
    """

    times: tuple[int, ...]
    mean: tuple[float, ...]
    low: tuple[float, ...]
    high: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Baseline:
    """Centre and spread of one stream, from the first part, in the words of the configuration.

    ``stream`` is written as ``head=4;lane=1``, empty where there is but one. ``mean_proof`` is the
    mean of the last part: how far the stream has gone since.
    """

    stream: str
    mean: float
    sigma: float
    sigma_between: float
    mean_proof: float


@dataclass(frozen=True, slots=True)
class StreamFound:
    """One stream: its name, readings, and how it looks."""

    stream: str
    readings: int
    outline: Outline


@dataclass(frozen=True, slots=True)
class Wander:
    """Whether subgroup means keep to a centre.

    ``lengths`` are numbers m of subgroups, ``ratios`` m times the variance of means of m over the
    variance of single ones: about 1 where subgroups are independent, level where they follow each
    other for a while, ever rising where the process wanders. ``growth`` is the ratio at 200 over
    that at 50, None where the recording is too short to tell; above ``limit`` it wanders. ``moved``
    are the streams that moved once and stayed away, the one that did so most clearly first, where
    nothing wanders but for that. ``wanders``: no interval can be told, for either.
    """

    lengths: tuple[int, ...]
    ratios: tuple[float, ...]
    growth: float | None
    limit: float
    wanders: bool
    moved: tuple[Moved, ...] = ()


@dataclass(frozen=True, slots=True)
class Grouping:
    """One way of gathering readings into subgroups, and what the recording is like in it.

    ``size`` is readings in a subgroup (for windows: the usual number); ``said`` says it in words.
    ``fit`` and ``proof`` count subgroups of all streams in the two parts, ``rate`` is subgroups of
    all streams in a running second. ``correlation`` is the first-lag autocorrelation of subgroup
    means. ``supports`` is the longest interval between false alarms, in seconds, that the last part
    may be asked for. ``baselines`` are in the order of ``Result.streams``.
    """

    size: int
    said: str
    fit: int
    proof: int
    rate: float
    correlation: float
    wander: Wander
    supports: float
    baselines: tuple[Baseline, ...]


@dataclass(frozen=True, slots=True)
class Alarm:
    """A signal in the last part: the instant of the subgroup's last reading, and the stream;
    ``direction`` is None for a spread or a pattern that has none."""

    time: int
    stream: str
    direction: Literal["up", "down"] | None


@dataclass(frozen=True, slots=True)
class Observed:
    """False alarms counted in the last part (signals outside labelled real causes).

    ``alarms`` in ``seconds`` of running time. ``interval`` is what that count says of the seconds
    between false alarms (Poisson); with none seen its ``low`` is a third of the time, at 95 %, and
    ``high`` None. None altogether where the process wanders.
    """

    alarms: int
    seconds: float
    interval: Range | None


@dataclass(frozen=True, slots=True)
class Extrapolated:
    """Seconds between false alarms by the tail of the statistic in the last part or, ``counted``,
    by its alarms, where they are many.

    ``factor``: the truth lies between ``seconds`` / factor and ``seconds`` · factor, with 90 %.
    More than ``Grouping.supports`` is not told: where the tail speaks of more, ``seconds`` is that
    bound, ``interval.low`` no more than it, and ``interval.high`` None.
    """

    seconds: float
    factor: float
    interval: Range
    counted: bool = False


@dataclass(frozen=True, slots=True)
class Tail:
    """The largest values that the statistic reached in the last part, between returns to its rest.

    ``levels`` (rising, at most 200) and ``rates``: how often a subgroup, all streams together, a
    level or one above it is reached. Levels are in the detector's own constants (h or width), and
    ``limit`` is the setting's. From ``threshold`` up the line exp(−(g(level) − g(threshold)) /
    scale) · ``rate`` was fitted, with g the level itself (``scaled`` "level") or nearly half its
    square (``scaled`` "square"): ``tails.scale_of(level, weight, unit)`` is exact for both.
    """

    levels: tuple[float, ...]
    rates: tuple[float, ...]
    limit: float
    threshold: float
    rate: float
    scale: float
    scaled: Literal["level", "square"]
    weight: float | None = None
    unit: float = 1.0


@dataclass(frozen=True, slots=True)
class Quantile:
    """A point of a distribution of delays with its interval from resampled hours; None where not
    that many drifts were caught within the horizon."""

    value: float | None
    interval: Range | None


@dataclass(frozen=True, slots=True)
class Delay:
    """How late drifts of one shape and size were caught, after their onset in the last part.

    ``amount`` is in the gauge's unit for a step, and for a ramp where it ends; for a spread the
    factor on sigma. ``onsets`` drifts were put in, ``caught`` of them within ``horizon`` readings.
    ``readings`` are pieces of the drifting stream from the onset, ``seconds`` running time.
    ``floor_readings`` and ``floor_seconds``: the average of the CUSUM tuned to that step at the
    promised interval, in the textbook's world (independent, normal, from rest); None where there is
    none (ramps, spreads, shifts not above ``ignore``).
    """

    shape: Shape
    amount: float
    onsets: int
    caught: int
    horizon: int
    median_readings: Quantile
    late_readings: Quantile
    """The 90 % point."""
    median_seconds: Quantile
    late_seconds: Quantile
    floor_readings: float | None
    floor_seconds: float | None


@dataclass(frozen=True, slots=True)
class EventScore:
    """A setting on labelled events of the whole recording.

    Of ``causes`` real ones ``caught`` were signalled, ``median_seconds`` and ``late_seconds`` (90 %
    point) of running time after they began, None where none was; of ``false_verdicts`` alarms that
    the crew called false, ``avoided`` were not rung.
    """

    causes: int
    caught: int
    median_seconds: float | None
    late_seconds: float | None
    false_verdicts: int
    avoided: int


@dataclass(frozen=True, slots=True)
class Setting:
    """One detector on one way of gathering subgroups, and what it did.

    ``name`` is unique. ``constants`` are keys and values as the configuration writes them (``k``,
    ``h``, ``clip``, ``lambda``, ``width``, …). ``catch`` and ``ignore`` are what it was made for,
    None where constants were given. ``grouping`` is its place in ``Result.groupings``.
    ``no_interval`` says why ``extrapolated`` is None; empty where it is not. ``meets``: the lower
    end of its interval is no shorter than ``asked``, which is its part of the promise in the
    configuration it is tried for: seconds between its own false alarms. ``rank`` counts from 1
    among those that do and watch the mean, by the 90 % point of the delay at the first ``catch``,
    and again from 1 among those that watch the spread, by that of the spread that was put in; None
    for others, and then ``unranked`` says why. ``delays`` at the sizes asked for; ``curve`` are
    steps of several sizes, for the best ones only, empty for others. ``alarms`` are at most 500,
    the first ones.
    """

    name: str
    kind: Kind
    chart: str
    origin: Origin
    grouping: int
    constants: tuple[tuple[str, float], ...]
    catch: float | None
    ignore: float | None
    observed: Observed
    extrapolated: Extrapolated | None
    no_interval: str
    tail: Tail | None
    delays: tuple[Delay, ...]
    curve: tuple[Delay, ...]
    events: EventScore | None
    alarms: tuple[Alarm, ...]
    asked: float
    meets: bool
    rank: int | None
    unranked: str

    @property
    def of_spread(self) -> bool:
        """Whether it watches the spread, not the mean."""
        return self.chart == "variance"


@dataclass(frozen=True, slots=True)
class Together:
    """All detectors of a configuration on every stream at once, as the crew hears them.

    ``detectors`` are their names; all are in ``observed``, counted by the engine's own alerts: as
    one what several detectors signal on one side of a stream until it has returned to normal, again
    what rings after that. ``signals`` is how many signals that were. ``standing`` is the share of
    the streams' time in the last part that an alert was open in: nothing more could ring there, and
    ``observed.seconds`` leaves it out. ``extrapolated`` adds up the rates of the detectors: its
    lower end is safe, since what rings together is counted twice; its upper end is that of the
    detector that rings most. ``delays`` and ``curve`` are of whichever detector is first; those in
    ``unfollowed`` are not among them, and could only be earlier. ``asked`` is the promise.
    """

    name: str
    detectors: tuple[str, ...]
    unfollowed: tuple[str, ...]
    grouping: int
    observed: Observed
    signals: int
    standing: float
    extrapolated: Extrapolated | None
    no_interval: str
    delays: tuple[Delay, ...]
    curve: tuple[Delay, ...]
    events: EventScore | None
    alarms: tuple[Alarm, ...]
    asked: float
    meets: bool


Shown = Setting | Together
"""What a row of a table may be of."""


@dataclass(frozen=True, slots=True)
class Refusal:
    """What was refused, why, and what to do: three short sentences."""

    what: str
    why: str
    instead: str


@dataclass(frozen=True, slots=True)
class Result:
    """Everything that one characteristic's recordings said.

    ``promise`` is the asked seconds between false alarms of all detectors together. ``catch`` and
    ``ignore`` are as asked, in the gauge's unit, the first of ``catch`` ranks; ``ratio`` is the
    spread that was put in. ``ramp`` is the readings of a stream over which a ramp grows.
    ``resolution``: the gauge's step, None where none was found. ``set_aside`` are readings not
    used, by reason. ``trust`` is the answer in one sentence to: may I trust this recording?
    ``trusted`` is false where no interval can be given at all, or none helps, as sources are mixed;
    ``with_care``: one can, but not without reserve. ``best`` is the place of the setting to take in
    ``settings``, None where none meets the promise or the recording is not trusted, and
    ``best_spread`` that of the one to take for the spread. ``settings`` are ordered: ranked ones
    first, of the mean and then of the spread. ``together`` is what runs today, None where no stream
    has a baseline yet, and ``proposed`` what the fragment would run, None where it changes nothing.
    ``fragment`` is the YAML that puts the best into the configuration, empty without one;
    ``notes`` are sentences on what it replaces and keeps, and ``breaking`` the names of those that
    it keeps although they broke their part of the promise. ``events`` counts labelled events.
    """

    characteristic: str
    title: str
    unit: str
    sources: tuple[Source, ...]
    seed: int
    promise: float
    catch: tuple[float, ...]
    ignore: tuple[float, ...]
    ratio: float
    ramp: int
    resolution: float | None
    whole: Part
    fit: Part
    proof: Part
    set_aside: tuple[tuple[str, int], ...]
    streams: tuple[StreamFound, ...]
    groupings: tuple[Grouping, ...]
    settings: tuple[Setting, ...]
    refusals: tuple[Refusal, ...]
    trust: str
    trusted: bool
    with_care: bool
    best: int | None
    best_spread: int | None
    together: Together | None
    proposed: Together | None
    fragment: str
    notes: tuple[str, ...]
    events: int
    breaking: tuple[str, ...] = ()
