"""Centre and spread of each stream by several estimators, and how the streams compare.

Knows which estimate becomes the baseline. Must not know detectors, verdicts or words.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from monitor.baselining.material import StreamSubgroups
from monitor.baselining.moving import Moved, cut_at, most_moved
from monitor.methods import autocorrelation, estimates, shift
from monitor.methods.estimates import Components
from monitor.methods.f_ratio import Comparison, compare, f_cdf, f_sf
from monitor.methods.normal import Array
from monitor.methods.shape import Shape, shape
from monitor.methods.shift import Move
from monitor.methods.wander import Wander, wander
from monitor.plan import Stream

SigmaBy = Literal["pooled", "range", "sd"]
BetweenBy = Literal["components", "moving-range", "none"]

_LAGS = 200
DIFFER = 0.01
"""The chance below which streams count as different."""
_ALIKE, _DOUBT = 1.02, 0.001
"""Inflation worth speaking of, and the chance below which means count as following each other."""
_APART = 1.2
"""The ratio of variances from which on it matters that they differ."""


@dataclass(frozen=True, slots=True)
class Values:
    """A baseline: ``sigma`` of single readings, ``sigma_between`` of subgroup means beyond it."""

    mean: float
    sigma: float
    sigma_between: float

    def error(self, n: float) -> float:
        """Standard error of the mean of ``n`` readings."""
        return math.sqrt(self.sigma_between**2 + self.sigma**2 / n)


@dataclass(frozen=True, slots=True)
class Spreads:
    """Every estimate, in the gauge's unit; nan where it cannot be had. Within subgroups: pooled,
    from ranges, from standard deviations; of single readings from moving ranges, mean and median.
    Between subgroups: from components of variance, and from the moving range of means. Total."""

    pooled: float
    from_ranges: float
    from_sds: float
    moving_range: float
    median_moving_range: float
    between_components: float
    between_moving_range: float
    total: float


@dataclass(frozen=True, slots=True)
class StreamEstimate:
    """One stream. ``effective``: how many independent subgroups its subgroups are worth.
    ``components``: None for single readings."""

    stream: Stream
    subgroups: int
    readings: int
    size: float
    values: Values
    spreads: Spreads
    components: Components | None
    effective: float
    shape: Shape | None


@dataclass(frozen=True, slots=True)
class Estimate:
    """All streams. ``common`` are values for all of them together.

    ``correlation``: of subgroup means at lag 1. ``follows``: whether successive means follow each
    other more than chance explains; ``memory``: then, their autocorrelations, lags 0 …, as far as
    they reach, else 1 alone. ``heads`` compares the streams' means, None where there is but one;
    ``differ`` says whether means or spreads of streams do. ``shape`` is of the standardised means.
    ``moved``, where the centre seems to wander: the streams that moved, the one that did so most
    first; ``stayed`` says that they moved and stayed away for certain. Then ``memory`` is what
    there is of it but for the move, and so is ``wander``, where nothing else wanders. ``between``
    is how sigma_between was estimated.
    """

    each: tuple[StreamEstimate, ...]
    common: Values
    single: bool
    correlation: float
    follows: bool
    memory: Array
    heads: Comparison | None
    differ: bool
    spread_ratio: float
    shape: Shape | None
    wander: Wander | None
    moved: tuple[Moved, ...]
    stayed: bool
    first: int
    last: int
    between: BetweenBy

    @property
    def inflation(self) -> float:
        """By how much the variance of a long mean is that of independent ones."""
        return autocorrelation.inflation(self.memory)

    @property
    def subgroups(self) -> int:
        """Of all streams."""
        return sum(each.subgroups for each in self.each)

    @property
    def readings(self) -> int:
        """Of all streams."""
        return sum(each.readings for each in self.each)

    @property
    def by_stream(self) -> dict[Stream, Values]:
        """A baseline for each stream."""
        return {each.stream: each.values for each in self.each}

    @property
    def weakest(self) -> Stream | None:
        """The stream whose own baseline has least behind it; None where all have one together."""
        if not self.differ or len(self.each) < 2:
            return None
        return min(self.each, key=lambda each: each.effective).stream

    @property
    def least_effective(self) -> float:
        """Independent subgroups behind the weakest baseline that is written."""
        effective = [each.effective for each in self.each]
        return min(effective) if self.differ else sum(effective)


def estimate(
    streams: Sequence[StreamSubgroups], sigma: SigmaBy = "pooled", between: BetweenBy = "components"
) -> Estimate:
    """Estimates from streams that have two subgroups or more each; ValueError without any."""
    streams = [each for each in streams if len(each) > 1]
    if not streams:
        raise ValueError("a baseline takes two subgroups of a stream")
    single = all((each.n == 1).all() for each in streams)
    standard = [_standardised(each) for each in streams]
    moves = shift.moves(standard)
    # A move that stayed looks like a memory that never ends.
    steady = [_standard(each) for each in shift.levelled(standard, moves)] if moves else standard
    lags = min(_LAGS, max(2, max(map(len, streams)) // 4))
    correlation = autocorrelation.correlations(steady, lags)
    total = sum(map(len, streams))
    memory = autocorrelation.memory(correlation, total)
    follows = (
        autocorrelation.inflation(memory) > _ALIKE
        and autocorrelation.independence_p(correlation, total) < _DOUBT
    )
    memory = memory if follows else np.ones(1)
    inflation = autocorrelation.inflation(memory)
    each = tuple(
        _stream(s, z, sigma, between, inflation) for s, z in zip(streams, standard, strict=True)
    )
    heads = compare(
        np.array([float(len(s)) for s in streams]),
        np.array([float(s.mean.mean()) for s in streams]),
        np.array([float(s.mean.var(ddof=1)) for s in streams]),
        inflation,
    )
    spread_ratio, spreads_differ = _compare_spreads(each)
    found = wander([z for z in standard if z.any()])
    if moves and found is not None:
        rest = wander([z for z in steady if z.any()])
        # One move, with a steady centre before and after it, is no wandering.
        found = rest if rest is None or not rest.may_wander else found
    return Estimate(
        each,
        _common(streams, each, sigma, between, single),
        single,
        float(correlation[1]) if math.isfinite(correlation[1]) else 0.0,
        follows,
        memory,
        heads,
        (heads is not None and heads.p < DIFFER) or spreads_differ,
        spread_ratio,
        _shape_of_means(streams, inflation),
        found,
        _moved(streams, moves, found is not None and found.may_wander),
        bool(moves),
        min(int(s.time[0]) for s in streams),
        max(int(s.time[-1]) for s in streams),
        between,
    )


def behaving(all_of: Estimate, inside: Estimate) -> Estimate:
    """The values of ``all_of``, for a process that behaves as those inside the limits do."""
    effective = [replace(e, effective=e.subgroups / inside.inflation) for e in all_of.each]
    return replace(
        all_of,
        each=tuple(effective),
        correlation=inside.correlation,
        follows=inside.follows,
        memory=inside.memory,
        heads=inside.heads,
        differ=inside.differ,
        spread_ratio=inside.spread_ratio,
        shape=inside.shape,
        wander=inside.wander,
        moved=(all_of if all_of.stayed else inside).moved,
        stayed=all_of.stayed or inside.stayed,
    )


def _moved(
    streams: Sequence[StreamSubgroups], moves: Sequence[Move], wanders: bool
) -> tuple[Moved, ...]:
    means = [(each.stream, each.time, each.mean) for each in streams]
    if moves:
        return tuple(cut_at(means[move.number], move.index) for move in moves)
    return most_moved(means) if wanders else ()


def _shape_of_means(streams: Sequence[StreamSubgroups], inflation: float) -> Shape | None:
    """Of all streams' means, each stream's standardised; None where nothing varies."""
    varying = [z for z in map(_standardised, streams) if z.any()]
    if not varying:
        return None
    pooled = np.concatenate(varying)
    return shape(pooled, len(pooled) / inflation)


def _standardised(stream: StreamSubgroups) -> Array:
    return _standard(stream.mean)


def _standard(values: Array) -> Array:
    deviation = values - values.mean()
    sd = float(values.std(ddof=1))
    return np.asarray(deviation / sd if sd > 0 else np.zeros(len(deviation)))


def _stream(
    stream: StreamSubgroups,
    standard: Array,
    sigma: SigmaBy,
    between: BetweenBy,
    inflation: float,
) -> StreamEstimate:
    spreads, found = _spreads(stream)
    effective = len(stream) / inflation
    return StreamEstimate(
        stream.stream,
        len(stream),
        int(stream.n.sum()),
        float(np.median(stream.n)),
        _values(stream, spreads, sigma, between),
        spreads,
        found,
        effective,
        shape(standard, effective),
    )


def _spreads(stream: StreamSubgroups) -> tuple[Spreads, Components | None]:
    n, mean, variance = stream.n, stream.mean, stream.variance
    found = estimates.components(n, mean, variance)
    of_means = estimates.moving_range_sigma(mean, stream.broken)
    if found is None:  # of single readings the means are the readings
        total = float(mean.std(ddof=1))
        short = of_means if math.isfinite(of_means) else total
        beyond = math.sqrt(max(0.0, total**2 - short**2))
        median = estimates.median_moving_range_sigma(mean, stream.broken)
        return Spreads(math.nan, math.nan, math.nan, of_means, median, beyond, 0.0, total), None
    pooled = estimates.pooled_sigma(n, variance)
    beyond = math.sqrt(max(0.0, of_means**2 - found.within * float((1 / n).mean())))
    return Spreads(
        pooled,
        estimates.sigma_from_ranges(n, stream.range),
        estimates.sigma_from_sds(n, variance),
        math.nan,
        math.nan,
        found.sigma_between,
        beyond,
        estimates.total_sigma(n, mean, variance),
    ), found


def _values(
    stream: StreamSubgroups, spreads: Spreads, sigma: SigmaBy, between: BetweenBy
) -> Values:
    centre = float(stream.n @ stream.mean) / float(stream.n.sum())
    within = {"pooled": spreads.pooled, "range": spreads.from_ranges, "sd": spreads.from_sds}[sigma]
    if not math.isfinite(within):
        short = spreads.moving_range
        within = short if math.isfinite(short) else spreads.total
    beyond = {
        "components": spreads.between_components,
        "moving-range": spreads.between_moving_range,
        "none": 0.0,
    }[between]
    return Values(centre, within, beyond if math.isfinite(beyond) else 0.0)


def _common(
    streams: Sequence[StreamSubgroups],
    each: Sequence[StreamEstimate],
    sigma: SigmaBy,
    between: BetweenBy,
    single: bool,
) -> Values:
    """Of all streams as one: the mean of all readings, variances weighted by their freedom."""
    if len(each) == 1:
        return each[0].values
    readings = np.array([float(e.readings) for e in each])
    freedom = readings if single else np.array([float((s.n - 1).sum()) for s in streams])
    subgroups = np.array([float(e.subgroups) for e in each])
    means = np.array([e.values.mean for e in each])
    within = np.array([e.values.sigma**2 for e in each])
    beyond = np.array([e.values.sigma_between**2 for e in each])
    if between == "components":
        # Signed, so that what is nothing in most streams does not add up from the others.
        beyond = np.array([_signed(e) for e in each])
    return Values(
        float(readings @ means / readings.sum()),
        math.sqrt(float(freedom @ within / freedom.sum())),
        math.sqrt(max(0.0, float(subgroups @ beyond / subgroups.sum()))),
    )


def _signed(each: StreamEstimate) -> float:
    """The variance between subgroups as estimated, below 0 where chance makes it so."""
    parts, spreads = each.components, each.spreads
    if parts is not None:
        return (parts.between - parts.within) / parts.size
    return spreads.total**2 - each.values.sigma**2


def _compare_spreads(each: Sequence[StreamEstimate]) -> tuple[float, bool]:
    """The largest variance over the smallest, and whether that is more than chance and matters.

    Each stream's against all the others' pooled, by F, with every comparison counted (Bonferroni).
    """
    if len(each) < 2:
        return 1.0, False
    variance = np.array([e.values.sigma**2 for e in each])
    # A moving range of single readings is worth some six tenths of a degree of freedom.
    freedom = np.array([float(e.components.within_freedom if e.components else 0.6 * e.subgroups)
                        for e in each])  # fmt: skip
    least = float(variance.min())
    if least <= 0:
        return (math.inf if variance.max() > 0 else 1.0), bool(variance.max() > 0)
    differ = False
    whole, all_freedom = float(freedom @ variance), float(freedom.sum())
    for own, own_freedom in zip(variance.tolist(), freedom.tolist(), strict=True):
        others = (whole - own_freedom * own) / (all_freedom - own_freedom)
        ratio = own / others
        tails = (f(ratio, own_freedom, all_freedom - own_freedom) for f in (f_sf, f_cdf))
        apart = max(ratio, 1 / ratio) > _APART
        differ = differ or (apart and 2 * len(each) * min(tails) < DIFFER)
    return float(variance.max()) / least, differ
