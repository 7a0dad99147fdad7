"""Run lengths of planned detectors, and detectors solved from what people can judge.

Knows which published method belongs to which plan. Must not know streams, sigma or time: shifts are
in standard errors of the charted statistic, run lengths in subgroups, from the detector's start.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal

from monitor.methods import medians
from monitor.methods.constants import median_se
from monitor.methods.normal import upper_quantile
from monitor.methods.runlength import cusum, ewma, rules, shewhart, simulation, spread
from monitor.plan import CusumPlan, EwmaPlan, RulePlan, Scheme, ShewhartPlan, Side

Kind = Literal["shewhart", "cusum", "ewma"]

_NARROWEST = 150.0
"""Of an EWMA: width over its standard error in that of the points; some seconds to compute."""

_FARTHEST = 30
"""Points that zone rules may look back at in a simulation; some seconds as well."""


@dataclass(frozen=True, slots=True)
class RunLength:
    """An average run length; ``standard_error`` is 0 where it is not simulated."""

    subgroups: float
    standard_error: float = 0.0


def run_length(scheme: Scheme, shift: float = 0.0, *, size: int = 1) -> RunLength:
    """Average run length of ``scheme`` on subgroups of ``size`` after a ``shift`` of the mean.

    A chart of spread does not see the shift. The clip of an EWMA, which lengthens its run length a
    little, is left out. Raises ValueError for what takes too long to compute: a CUSUM of an h, an
    EWMA of a lambda or zone rules of a reach beyond use.
    """
    match scheme:
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
            if scheme.width**2 > _NARROWEST**2 * scheme.lam * (2 - scheme.lam):
                raise ValueError(f"lambda {scheme.lam:g} is too small to compute a run length for")
            return RunLength(
                ewma.run_length(
                    scheme.lam,
                    scheme.width,
                    shift,
                    direction=scheme.direction,
                    asymptotic=scheme.asymptotic,
                )
            )
        case ShewhartPlan(chart="range" | "sd" as statistic):
            width = _narrowest(scheme)
            return RunLength(spread.run_length(statistic, size, width, direction=scheme.direction))
        case ShewhartPlan(chart="moving_range"):
            never = scheme.direction == "down"  # its lower limit is 0 at any width worth having
            width = _narrowest(scheme)
            return RunLength(math.inf if never else spread.moving_range_run_length(width))
        case ShewhartPlan(chart="median"):
            if all(rule.rule == "outside" for rule in scheme.rules):
                width = _narrowest(scheme)
                return RunLength(
                    shewhart.median_run_length(size, width, shift, direction=scheme.direction)
                )
            patterns = tuple(_as_normal(rule, size) for rule in scheme.rules)
            return _patterns(patterns, shift, scheme.direction)
        case ShewhartPlan():
            return _patterns(scheme.rules, shift, scheme.direction)


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
) -> Scheme:
    """The detector of that ``kind`` for a shift of ``catch`` whose run length is ``interval`` while
    the mean is off by ``ignore``; both are sizes, towards the direction watched, ``catch`` larger.

    CUSUM: k midway between the two (E. S. Page 1954; optimal by G. V. Moustakides 1986), h solved.
    EWMA: the λ that signals ``catch`` soonest, width solved. Shewhart: the normal quantile,
    whatever ``catch`` is. ValueError where no setting has that interval.
    """
    off = -ignore if direction == "down" else ignore
    match kind:
        case "cusum":
            k = (catch + ignore) / 2
            h = cusum.decision_interval(
                k, interval, off, direction=direction, head_start=head_start
            )
            return CusumPlan("mean", k, h, head_start, direction=direction)
        case "ewma":
            sides: Side = "both" if direction == "both" else "up"
            lam = ewma.best_weight(catch, interval, ignore, direction=sides)
            width = ewma.width_for(lam, interval, off, direction=direction, asymptotic=asymptotic)
            return EwmaPlan("mean", lam, width, asymptotic, direction=direction)
        case "shewhart":
            width = shewhart.width_for(interval, off, direction=direction)
            return ShewhartPlan("mean", width, (RulePlan("outside", width),), direction)


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
