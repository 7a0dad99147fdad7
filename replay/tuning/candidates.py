"""Which settings are tried: those worked out from what people can judge, given ones, the present
ones.

Knows standard errors and what was asked. Must not know readings or how settings do.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from monitor.plan import (
    ByCount,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    EwmaPlan,
    RulePlan,
    Scheme,
    ShewhartPlan,
)
from replay.tuning.declared import Declared
from replay.tuning.grouped import Grouped
from replay.tuning.labels import Label
from replay.tuning.result import Kind, Origin
from replay.tuning.shares import configured_part, part, role

CLIP = 3.0
"""Standard errors; one wild reading must not ring by itself, nor decide the fit."""

AS_CONFIGURED = "as configured: "

_HEAVIEST = 0.3  # λ above which a clipped average could hardly reach its limit


@dataclass(frozen=True, slots=True)
class Request:
    """What was asked. ``promise`` is seconds between false alarms of the characteristic, all its
    detectors together, and ``promised`` what stands in the configuration, None where nothing does;
    ``catch`` and ``ignore`` are in the gauge's unit; ``cusums`` hold (k, h), ``ewmas`` (λ, width),
    ``shewharts`` widths; ``ratio`` is how many times as large a spread is put in and, where
    ``spread``, to be watched for; ``sizes`` of subgroups, none: as configured; ``declared`` are the
    detectors that stand in the configuration."""

    promise: float
    catch: tuple[float, ...]
    ignore: tuple[float, ...] = (0.0,)
    promised: float | None = None
    kinds: tuple[Kind, ...] = ("cusum", "ewma", "shewhart")
    sizes: tuple[int, ...] = ()
    cusums: tuple[tuple[float, float], ...] = ()
    ewmas: tuple[tuple[float, float], ...] = ()
    shewharts: tuple[float, ...] = ()
    ratio: float = 1.5
    spread: bool = False
    labels: tuple[Label, ...] = ()
    declared: tuple[Declared, ...] = ()
    seed: int = 0
    jobs: int = 1


@dataclass(frozen=True, slots=True)
class Candidate:
    """One setting to try; with origin ``calibrated`` the limit in its scheme means nothing yet.
    ``part`` of the promised rate of false alarms is its own."""

    name: str
    kind: Kind
    scheme: Scheme
    origin: Origin
    catch: float | None = None
    ignore: float | None = None
    part: float = 1.0


def limit(scheme: Scheme) -> float:
    """h of a CUSUM, else the width."""
    return scheme.h if isinstance(scheme, CusumPlan) else scheme.width


def with_limit(scheme: Scheme, value: float) -> Scheme:
    """The scheme with another limit."""
    match scheme:
        case CusumPlan():
            share = None if scheme.h_lower is None else scheme.h_lower / scheme.h * value
            return replace(scheme, h=value, h_lower=share)
        case EwmaPlan():
            return replace(scheme, width=value)
        case ShewhartPlan():
            return replace(scheme, width=value, rules=(RulePlan("outside", value),))


def candidates(
    request: Request,
    grouped: Grouped,
    error: float,
    interval: float,
    correlation: float = 0.0,
) -> list[Candidate]:
    """Settings worked out for subgroups with that standard ``error`` (gauge's unit), neighbours of
    which have that ``correlation``, and given constants; ``interval`` is the promise in subgroups
    of one stream."""
    chart: Chart = "individual" if grouped.plan == ByCount(1) or grouped.size == 1 else "mean"
    if not isinstance(grouped.plan, ByCount):
        chart = "mean"
    worked_out = _worked_out(request, chart, error, interval, correlation, grouped.size)
    found = [*worked_out, *_given(request, chart)]
    return [
        replace(each, name=f"{each.name}, size {grouped.size}", part=_part(each.scheme, request))
        for each in found
    ]


def _part(scheme: Scheme, request: Request) -> float:
    kind = "shewhart" if isinstance(scheme, ShewhartPlan) else "cusum"
    own = role(kind, scheme.chart, scheme.direction)
    return 1.0 if own is None else part(own, request.declared, request.spread)


def _worked_out(
    request: Request,
    chart: Chart,
    error: float,
    interval: float,
    correlation: float,
    size: int,
) -> Iterator[Candidate]:
    for kind in request.kinds:
        if kind == "shewhart":
            scheme = ShewhartPlan(chart, 3.0, (RulePlan("outside", 3.0),))
            yield Candidate("shewhart", kind, scheme, "calibrated")
            continue
        for catch, ignore in itertools.product(request.catch, request.ignore):
            if ignore >= catch:
                continue
            name = f"{kind}, catch {catch:g}" + (f", ignore {ignore:g}" if ignore else "")
            yield Candidate(
                name,
                kind,
                _for(kind, chart, catch / error, ignore / error, interval, correlation),
                "calibrated",
                catch,
                ignore,
            )
    if request.spread and size > 1 and "cusum" in request.kinds:
        yield Candidate(
            f"cusum, catch_ratio {request.ratio:g}",
            "cusum",
            CusumPlan(
                "variance",
                _written(variance_reference(request.ratio)),
                1.0,
                direction="up",
                size=size,
            ),
            "calibrated",
        )


def variance_reference(ratio: float) -> float:
    """k of the CUSUM of S²/σ² for a spread ``ratio`` times as large: 2 ln r · r²/(r² − 1), by the
    likelihood ratio (D. M. Hawkins & D. H. Olwell 1998, Cumulative Sum Charts)."""
    return 2 * math.log(ratio) * ratio**2 / (ratio**2 - 1)


def _written(value: float) -> float:
    """As many digits as anybody copies."""
    return float(f"{value:.5g}")


def _for(
    kind: Kind, chart: Chart, catch: float, ignore: float, interval: float, correlation: float
) -> Scheme:
    if kind == "cusum":
        k = float(f"{(catch + ignore) / 2:.4g}")
        return CusumPlan(chart, k, 1.0, clip=max(CLIP, round(2 * k, 2)))
    lam = float(f"{ewma_weight(catch, ignore, interval):.3g}")
    clip = round(CLIP * spreading(lam, correlation), 1) if lam <= _HEAVIEST else None
    return EwmaPlan(chart, lam, 1.0, clip=clip)


def spreading(lam: float, correlation: float) -> float:
    """How many times as far an average of weight ``lam`` spreads, and its limit lies, where
    neighbours correlate so and those further apart as of a first-order autoregression: √((1 + φq) /
    (1 − φq)), q = 1 − λ (D. C. Montgomery & C. M. Mastrangelo 1991, Journal of Quality Technology
    23, from memory). No less than 1."""
    together = max(correlation, 0.0) * (1 - lam)
    return math.sqrt((1 + together) / (1 - together))


def ewma_weight(catch: float, ignore: float, interval: float) -> float:
    """λ for a shift of ``catch``, in standard errors, whose delay in the textbook is within 8 % of
    the shortest, and nearly always within 3 %.

    A formula fitted to ``monitor.methods.runlength.ewma.best_weight``, which takes longer than all
    else that a candidate costs.
    """
    lam = 0.527 * math.pow(catch, 1.75) / (math.log(max(interval, 100.0)) - 2.0)
    return min(max(lam * max(1 - 1.6 * (ignore / catch) ** 2, 0.2), 0.003), 1.0)


def _given(request: Request, chart: Chart) -> Iterator[Candidate]:
    for k, h in request.cusums:
        yield Candidate(f"cusum {k:g},{h:g}", "cusum", CusumPlan(chart, k, h), "given")
    for lam, width in request.ewmas:
        yield Candidate(f"ewma {lam:g},{width:g}", "ewma", EwmaPlan(chart, lam, width), "given")
    for width in request.shewharts:
        scheme = ShewhartPlan(chart, width, (RulePlan("outside", width),))
        yield Candidate(f"shewhart {width:g}", "shewhart", scheme, "given")


def configured(
    plan: CharacteristicPlan, declared: Sequence[Declared]
) -> tuple[list[Candidate], list[str]]:
    """The configuration's own detectors, and the names of those that arrays cannot carry out."""
    found: list[Candidate] = []
    left: list[str] = []
    judgement = plan.example()[1]
    for each in judgement.detectors if judgement is not None else ():
        scheme = each.scheme
        plain = isinstance(scheme, CusumPlan | EwmaPlan) or (
            scheme.chart in ("mean", "individual")
            and all(rule.rule == "outside" for rule in scheme.rules)
        )
        if not plain:
            left.append(each.name)
            continue
        if isinstance(scheme, ShewhartPlan):
            width = min(rule.width for rule in scheme.rules)
            scheme = replace(scheme, width=width, rules=(RulePlan("outside", width),))
        kind: Kind = (
            "cusum"
            if isinstance(scheme, CusumPlan)
            else "ewma"
            if isinstance(scheme, EwmaPlan)
            else "shewhart"
        )
        own = configured_part(each.name, declared)
        name = f"{AS_CONFIGURED}{each.name}"
        found.append(Candidate(name, kind, scheme, "configured", part=own))
    return found, left
