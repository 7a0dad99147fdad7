"""What one setting did on the recording: limits fitted on its first part, proved on the last.

Knows peaks, signals and parts. Must not know drifts, words or files.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.plan import ByCount, CusumPlan, EwmaPlan, RulePlan, Scheme, ShewhartPlan
from replay.readings import Values
from replay.tuning import tails
from replay.tuning.array_cusum import CusumPath
from replay.tuning.array_ewma import EwmaPath
from replay.tuning.array_shewhart import ShewhartPath
from replay.tuning.candidates import Candidate, limit, with_limit
from replay.tuning.changed import resolution
from replay.tuning.grouped import Grouped, GroupedStream
from replay.tuning.paths import Path, Peaks, Signals
from replay.tuning.tails import PooledPeaks, TailFit

_ROUNDS = 8
_BY_ITSELF = 0.8  # of its limit
_MOST = 5.0
"""Of an interval's logarithm, standard deviations open: beyond, a recording proves nothing."""


@dataclass(frozen=True, slots=True)
class Judged:
    """A candidate with its constants, and what came of them.

    ``fitted`` and ``proved`` are the tails of the two parts, None where peaks are too few.
    ``signals`` are those of the whole recording, one entry a stream. ``coarse``: the limit is one
    of single points that lie on too few values for their tail to be drawn on. ``wild``: nothing
    clips, and the furthest point takes the statistic to its limit, or nearly, by itself.
    """

    candidate: Candidate
    scheme: Scheme
    fitted: TailFit | None
    proved: TailFit | None
    signals: tuple[Signals, ...]
    coarse: bool = False
    wild: bool = False


def family(candidate: Candidate) -> Scheme:
    """Candidates of one family differ in their limits only: one pass over the readings serves
    them."""
    return with_limit(candidate.scheme, 1.0)


def judge(
    grouped: Grouped, members: Sequence[Candidate], interval: float, wildest: float = 0.0
) -> list[Judged]:
    """Every member of one family; ``interval`` is the promise in subgroups of all streams, of which
    each has its part; ``wildest`` as :func:`furthest` has it.

    A calibrated limit is set so far beyond that part that the last part may be expected to prove
    it: by what 90 % leaves open of both parts' estimates. Where no tail can be fitted a calibrated
    member is left out.
    """
    scheme = members[0].scheme
    paths = [path(scheme, stream) for stream in grouped.streams]
    peaks = [each.peaks() for each in paths]
    unit = max(float(np.median([each.unit() for each in paths])), 1e-9)
    usual = _usual(scheme, grouped)
    fitted = _tail(grouped, peaks, scheme, unit, usual, proof=False)
    proved = _tail(grouped, peaks, scheme, unit, usual, proof=True)
    step = _step(scheme, grouped)
    found = []
    for candidate in members:
        at = limit(candidate.scheme)
        if candidate.origin == "calibrated":
            if fitted is None or proved is None:
                continue
            aim = interval / candidate.part
            at = float(f"{fitted.level(aim * margin(fitted, proved, aim)):.5g}")
        found.append(
            Judged(
                candidate,
                with_limit(candidate.scheme, at),
                fitted,
                proved,
                tuple(each.signals(at) for each in paths),
                # A step further, normal points are fewer by a factor of exp(limit · step).
                coarse=at * step > 1.0,
                wild=by_itself(scheme, wildest) > _BY_ITSELF * at,
            )
        )
    return found


def margin(fitted: TailFit, proved: TailFit, interval: float) -> float:
    """How many times the promise a limit must be fitted to, for both estimates to leave it; they
    leave more open the longer the interval that is fitted to."""
    times = 1.0
    for _ in range(_ROUNDS):
        aim = interval * times
        open_left = fitted.deviation(aim) + proved.deviation(aim)
        times = float(np.exp(tails.Z90 * min(open_left, _MOST)))
    return times


def path(scheme: Scheme, stream: GroupedStream) -> Path:
    """The statistic of ``scheme`` over one stream."""
    match scheme:
        case CusumPlan():
            return CusumPath(scheme, stream)
        case EwmaPlan():
            return EwmaPath(scheme, stream)
        case _:
            return ShewhartPath(scheme, stream)


def in_proof(grouped: Grouped, signals: Sequence[Signals]) -> list[Signals]:
    """Signals of the last part that no labelled cause explains, one entry a stream."""
    found = []
    for stream, each in zip(grouped.streams, signals, strict=True):
        counts = (each.at >= stream.prove) & ~stream.left_out[each.at]
        found.append(Signals(each.at[counts], each.up[counts]))
    return found


def by_itself(scheme: Scheme, point: float) -> float:
    """How far one point takes a sum or an average of means from its rest, in what its limit is in;
    0 where points are clipped, and of single points and spreads, which are judged by themselves."""
    match scheme:
        case CusumPlan(chart=chart, clip=None) if chart != "variance":
            return point - scheme.k
        case EwmaPlan(clip=None):
            return point * math.sqrt(scheme.lam * (2 - scheme.lam))
        case _:
            return 0.0


def furthest(grouped: Grouped, tried: Sequence[Candidate]) -> float:
    """The furthest point of the last part, in standard errors, where points have heavy tails; else
    0, and where no candidate feels one. A sum of such points has a heavy tail as well, beyond what
    its peaks so far show."""
    if not any(by_itself(each.scheme, math.inf) for each in tried):
        return 0.0
    scheme = ShewhartPlan("mean", 1.0, (RulePlan("outside", 1.0),))
    peaks = [path(scheme, stream).peaks() for stream in grouped.streams]
    points = _tail(grouped, peaks, scheme, 1.0, 1.0, proof=True)
    return float(points.levels[0]) if points is not None and points.heavy else 0.0


def _step(scheme: Scheme, grouped: Grouped) -> float:
    """How far apart neighbouring points of a Shewhart chart lie, in standard errors; 0 where they
    may lie anywhere."""
    if not isinstance(scheme, ShewhartPlan) or not isinstance(grouped.plan, ByCount):
        return 0.0
    step = resolution([each.readings for each in grouped.streams])
    if step is None:
        return 0.0
    return step / grouped.size / min(float(np.median(each.error)) for each in grouped.streams)


def _weight(scheme: Scheme) -> float | None:
    """What ``tails.scale_of`` takes: None for sums, λ of averages, 1 for single points."""
    if isinstance(scheme, CusumPlan):
        return None
    return scheme.lam if isinstance(scheme, EwmaPlan) else 1.0


def _usual(scheme: Scheme, grouped: Grouped) -> float | None:
    """The scale of the tail where readings are normal, of what nothing clips: 1 for points and
    averages, whose tails are told in that measure; for a sum of variances that of
    :func:`tails.of_variances`. None for sums of means, which hardly feel one reading."""
    if isinstance(scheme, EwmaPlan):
        return 1.0 if scheme.clip is None else None
    if not isinstance(scheme, CusumPlan):
        return 1.0
    if scheme.chart != "variance" or scheme.direction != "up" or scheme.clip is not None:
        return None
    ratios = [float(np.nanmean(each.sd**2)) / each.sigma**2 for each in grouped.streams]
    return tails.of_variances(scheme.k, max(ratios), grouped.size)


def _tail(
    grouped: Grouped,
    peaks: Sequence[Peaks],
    scheme: Scheme,
    unit: float,
    usual: float | None,
    *,
    proof: bool,
) -> TailFit | None:
    levels: list[Values] = []
    places = []
    for stream, each in zip(grouped.streams, peaks, strict=True):
        inside = each.begin >= stream.prove if proof else each.begin < stream.fit
        if stream.left_out.any():
            disturbed = np.concatenate(([0], np.cumsum(stream.left_out)))
            inside &= disturbed[each.end] == disturbed[each.begin]
        levels.append(each.level[inside])
        places.append(each.begin[inside])
    pooled: PooledPeaks = tails.pooled(
        levels,
        places,
        [len(stream) for stream in grouped.streams],
        grouped.proof if proof else grouped.fit,
    )
    return tails.fit(pooled, _weight(scheme), unit, usual)
