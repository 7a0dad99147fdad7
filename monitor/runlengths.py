"""Run lengths of planned detectors, and detectors solved from what people can judge.

Knows which published method belongs to which plan. Must not know streams, sigma or time: shifts are
in standard errors of the charted statistic, spreads are ratios to the baseline's, run lengths are
in subgroups, from the detector's start.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal

from monitor.methods import medians
from monitor.methods.constants import median_se
from monitor.methods.limits import WIDEST
from monitor.methods.normal import upper_quantile
from monitor.methods.runlength import (
    cusum,
    ewma,
    rules,
    shewhart,
    simulation,
    spread,
    variance_cusum,
)
from monitor.methods.runlength.chains import either
from monitor.methods.runlength.roots import increasing_root
from monitor.methods.runlength.waits import either_until, geometric_until
from monitor.plan import Chart, CusumPlan, EwmaPlan, RulePlan, Scheme, ShewhartPlan, Side

Kind = Literal["shewhart", "cusum", "ewma"]

_NARROWEST = 150.0
"""Of an EWMA: width over its standard error in that of the points; some seconds to compute."""

_LEAST_INTERVAL = 0.5
"""Of a CUSUM that is solved: below, its h would be no more than the room left to a single point."""

_TRIES = 30

_FARTHEST = 30
"""Points that zone rules may look back at in a simulation; some seconds as well."""


@dataclass(frozen=True, slots=True)
class RunLength:
    """An average run length; ``standard_error`` is 0 where it is not simulated."""

    subgroups: float
    standard_error: float = 0.0


def run_length(
    scheme: Scheme, shift: float = 0.0, *, size: int = 1, ratio: float = 1.0
) -> RunLength:
    """Average run length of ``scheme`` on subgroups of ``size`` after a ``shift`` of the mean, the
    spread of readings being ``ratio`` times the baseline's.

    A chart of spread does not see the shift, one of location is not asked about the ratio. Raises
    ValueError for what takes too long to compute: a CUSUM of an h, an EWMA of a lambda or zone
    rules of a reach beyond use.
    """
    match scheme:
        case CusumPlan(chart="variance"):
            lengths = [each.from_zero_and_start(ratio) for each in _sums(scheme, size)]
            return RunLength(lengths[0][1] if len(lengths) == 1 else either(*lengths))
        case CusumPlan():
            return RunLength(
                cusum.run_length(
                    scheme.k,
                    scheme.h,
                    shift,
                    direction=scheme.direction,
                    head_start=scheme.head_start,
                    clip=scheme.clip,
                )
            )
        case EwmaPlan():
            _refuse_narrow(scheme)
            return RunLength(
                ewma.run_length(
                    scheme.lam,
                    scheme.width,
                    shift,
                    direction=scheme.direction,
                    asymptotic=scheme.asymptotic,
                    clip=scheme.clip,
                )
            )
        case ShewhartPlan(chart="range" | "sd" | "variance" as statistic):
            width, sides = _narrowest(scheme), scheme.direction
            return RunLength(
                spread.run_length(
                    statistic, size, width, ratio, direction=sides, exact=scheme.exact
                )
            )
        case ShewhartPlan(chart="moving_range"):
            width, sides = _narrowest(scheme), scheme.direction
            return RunLength(
                spread.moving_range_run_length(width, ratio, direction=sides, exact=scheme.exact)
            )
        case ShewhartPlan(chart="median"):
            if _only_outside(scheme):
                width = _narrowest(scheme)
                return RunLength(
                    shewhart.median_run_length(size, width, shift, direction=scheme.direction)
                )
            patterns = tuple(_as_normal(rule, size) for rule in scheme.rules)
            return _patterns(patterns, shift, scheme.direction)
        case ShewhartPlan():
            return _patterns(scheme.rules, shift, scheme.direction)


def _refuse_narrow(scheme: EwmaPlan) -> None:
    if scheme.width**2 > _NARROWEST**2 * scheme.lam * (2 - scheme.lam):
        raise ValueError(f"lambda {scheme.lam:g} is too small to compute a run length for")


def _patterns(planned: tuple[RulePlan, ...], shift: float, direction: Side) -> RunLength:
    if rules.exact(planned):
        return RunLength(rules.run_length(planned, shift, direction=direction))
    if sum(rule.of for rule in planned) > _FARTHEST:
        raise ValueError("zone rules that look back so far are too much to compute")
    simulated = simulation.run_length(planned, shift, direction=direction)
    return RunLength(simulated.run_length, simulated.standard_error)


def _as_normal(rule: RulePlan, size: int) -> RulePlan:
    """A rule on medians as the rule on normal values that is met as often: rules compare points
    with each other, the centre and their widths, so mapping the median's distribution onto the
    normal one changes none of them. Exact in control; a shift is taken as one of the normal."""
    tail = medians.median_sf(rule.width * median_se(size), size)
    return replace(rule, width=upper_quantile(tail)) if rule.width and tail > 0 else rule


def _sums(scheme: CusumPlan, size: int) -> list[variance_cusum.Sum]:
    """Of a CUSUM of the variance, each sum that is watched; a subgroup of another size than planned
    counts for more or less, as if ``h`` were lower or higher."""
    nu = size - 1
    counts = nu / ((scheme.size or size) - 1)
    return [
        variance_cusum.Sum(
            k, h / counts, nu, "up" if statistic == "upper_sum" else "down", scheme.head_start
        )
        for statistic, k, h in scheme.sums()
    ]


def _only_outside(scheme: ShewhartPlan) -> bool:
    return all(rule.rule == "outside" for rule in scheme.rules)


def _narrowest(scheme: ShewhartPlan) -> float:
    """Of rules outside only, the narrowest decides."""
    return min(rule.width for rule in scheme.rules)


def solve(
    kind: Kind,
    catch: float,
    interval: float,
    *,
    ignore: float = 0.0,
    direction: Side = "both",
    head_start: float = 0.0,
    asymptotic: bool = False,
    clip: float | None = None,
) -> Scheme:
    """The detector of that ``kind`` for a shift of ``catch`` whose run length is ``interval`` while
    the mean is off by ``ignore``; both are sizes, towards the direction watched, ``catch`` larger.

    CUSUM: k midway between the two (E. S. Page 1954; optimal by G. V. Moustakides 1986), h solved;
    for a shift beyond all single points a smaller k, so that there is an h.
    EWMA: the λ that signals ``catch`` soonest, width solved. Shewhart: the normal quantile,
    whatever ``catch`` is. ``clip`` as planned. ValueError where no setting has that interval.
    """
    off = -ignore if direction == "down" else ignore
    match kind:
        case "cusum":
            # A shift so large that any single point shows it leaves k nothing to do beyond a
            # Shewhart limit: from there on k would only make false alarms rarer than asked.
            most = shewhart.width_for(interval, off, direction=direction) - _LEAST_INTERVAL
            k = (catch + ignore) / 2
            k = most if ignore < most < k else k
            h = cusum.decision_interval(
                k, interval, off, direction=direction, head_start=head_start, clip=clip
            )
            return CusumPlan("mean", k, h, head_start, clip, direction=direction)
        case "ewma":
            sides: Side = "both" if direction == "both" else "up"
            lam = ewma.best_weight(catch, interval, ignore, direction=sides)
            width = ewma.width_for(
                lam, interval, off, direction=direction, asymptotic=asymptotic, clip=clip
            )
            return EwmaPlan("mean", lam, width, asymptotic, clip, direction=direction)
        case "shewhart":
            width = shewhart.width_for(interval, off, direction=direction)
            return ShewhartPlan("mean", width, (RulePlan("outside", width),), direction)


def solve_median(interval: float, size: int, direction: Side = "both") -> ShewhartPlan:
    """The Shewhart chart of medians of ``size`` whose run length is ``interval`` in control.

    ValueError where none has that interval.
    """
    width = shewhart.median_width_for(size, interval, direction=direction)
    return ShewhartPlan("median", width, (RulePlan("outside", width),), direction)


def solve_variance(
    catch_ratio: float,
    interval: float,
    *,
    size: int,
    direction: Side = "both",
    head_start: float = 0.0,
) -> CusumPlan:
    """The CUSUM of the variance of subgroups of ``size`` ≥ 2 for a spread of ``catch_ratio`` times
    the baseline's, whose run length is ``interval`` while the spread is the baseline's.

    k by the likelihood ratio (D. M. Hawkins & D. H. Olwell 1998), h solved. ``down`` is for a
    spread that shrinks by as large a factor as ``catch_ratio`` or its inverse, ``both`` for either,
    each side with half the false alarms. ValueError where no setting has that interval, for a ratio
    that is none, and for ``up`` with a ratio below 1.
    """
    if catch_ratio <= 0 or catch_ratio == 1 or (direction == "up" and catch_ratio < 1):
        raise ValueError(f"no spread of {catch_ratio:g} times the usual is {direction}")
    grown, nu = max(catch_ratio, 1 / catch_ratio), size - 1

    def constants(side: variance_cusum.Way, wanted: float) -> tuple[float, float]:
        k = variance_cusum.reference_within(grown if side == "up" else 1 / grown, wanted, nu)
        h = variance_cusum.decision_interval(k, wanted, nu=nu, side=side, head_start=head_start)
        return k, h

    def both(each_side: float) -> CusumPlan:
        (k, h), (k_lower, h_lower) = constants("up", each_side), constants("down", each_side)
        return CusumPlan("variance", k, h, head_start, k_lower=k_lower, h_lower=h_lower, size=size)

    if direction != "both":
        k, h = constants(direction, interval)
        return CusumPlan("variance", k, h, head_start, direction=direction, size=size)
    each_side = 2 * interval
    plan = both(each_side)
    if not head_start:
        return plan
    for _ in range(_TRIES):  # what the start of both sums costs is not shared out evenly
        excess = run_length(plan, size=size).subgroups / interval
        if abs(excess - 1) <= 1e-5:
            return plan
        each_side /= excess
        plan = both(each_side)
    raise ValueError("no setting gives that run length")


def solve_spread_chart(
    chart: Chart, interval: float, size: int, direction: Side = "both"
) -> ShewhartPlan:
    """The Shewhart chart of spread (``range``, ``sd``, ``variance`` or ``moving_range``) whose run
    length is ``interval`` while the spread is the baseline's.

    Exact limits, each side watched with an equal part of the risk, so that the width is the same
    for any ``size``. ValueError where none has that interval.
    """
    width = spread.exact_width_for(interval, direction=direction)
    if chart == "moving_range":

        def excess(wide: float) -> float:
            found = spread.moving_range_run_length(wide, direction=direction, exact=True)
            return math.log(found / interval)

        width = increasing_root(excess, width, max(width, 1.0), 1e-7, WIDEST)
    elif size < 2:
        raise ValueError(f"a {chart} takes subgroups of 2 or more, not {size}")
    return ShewhartPlan(chart, width, (RulePlan("outside", width=width),), direction, exact=True)


def quantile(
    scheme: Scheme,
    shift: float = 0.0,
    probability: float = 0.5,
    *,
    size: int = 1,
    ratio: float = 1.0,
) -> float:
    """The number of subgroups within which ``scheme`` has signalled with that ``probability``
    (below 1), from its start; what else is given as for :func:`run_length`.

    Two sides are taken as independent, which they are but for shifts that neither tells from
    nothing wrong; a moving range's signals and those of rules that are simulated as coming at
    random. ValueError as of :func:`run_length`, and where signals are too rare.
    """
    match scheme:
        case CusumPlan(chart="variance"):
            waits = [each.wait(ratio) for each in _sums(scheme, size)]
            return either_until(waits, probability)
        case CusumPlan():
            sides = {"both": (shift, -shift), "up": (shift,), "down": (-shift,)}[scheme.direction]
            waits = [
                cusum.wait(scheme.k, scheme.h, each, scheme.head_start, scheme.clip)
                for each in sides
            ]
            return either_until(waits, probability)
        case EwmaPlan():
            _refuse_narrow(scheme)
            wait = ewma.wait(
                scheme.lam,
                scheme.width,
                shift,
                direction=scheme.direction,
                asymptotic=scheme.asymptotic,
                clip=scheme.clip,
            )
            return either_until([wait], probability)
        case ShewhartPlan() if not _only_outside(scheme) and rules.exact(scheme.rules):
            normal = scheme.rules
            if scheme.chart == "median":
                normal = tuple(_as_normal(rule, size) for rule in scheme.rules)
            return either_until([rules.wait(normal, shift, scheme.direction)], probability)
        case ShewhartPlan():
            return geometric_until(
                run_length(scheme, shift, size=size, ratio=ratio).subgroups, probability
            )


def floor(
    shift: float, interval: float, *, ignore: float = 0.0, direction: Side = "both"
) -> float | None:
    """Run length at ``shift`` of the CUSUM tuned to it, with the same ``interval`` at ``ignore``.

    For a known shift no rule has a smaller worst-case delay (G. V. Moustakides 1986). From a fresh
    start, as all are compared here, an EWMA or a head start may come in below it. None where the
    shift is not to be caught, or is too small to compute for.
    """
    away = abs(shift) if direction == "both" else shift if direction == "up" else -shift
    if away == ignore:
        return interval
    if away < ignore or not math.isfinite(interval):
        return None
    try:
        tuned = solve("cusum", away, interval, ignore=ignore, direction=direction)
    except ValueError:
        return None
    return run_length(tuned, shift).subgroups
