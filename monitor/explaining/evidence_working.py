"""The arithmetic behind an alert from what was kept with it, once its readings are gone.

Knows how sums and averages are found again from their last subgroups' means. Must not know
journals, or how it is told.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from functools import partial

from monitor import times
from monitor.explaining.working import CLOSE, Rung, Step, Working, clipped, counted, rule_of
from monitor.outputs import Evidence
from monitor.plan import CusumPlan, EwmaPlan, ShewhartPlan

_OF_MEANS = ("mean", "individual")


def from_evidence(evidence: Evidence, rung: Rung) -> Working:
    """The working up to the point that rang, which is the last; of a chart of anything but means,
    that point alone."""
    scheme = rung.detector.scheme
    steps: list[Step] = []
    carried: float | None = None
    if scheme.chart in _OF_MEANS and evidence.z:
        match scheme:
            case CusumPlan():
                steps, carried = _summed(evidence, scheme, rung)
            case EwmaPlan():
                steps, carried = _averaged(evidence, scheme, rung)
            case ShewhartPlan():
                steps = [_charted(step, rung) for step in _kept(evidence, rung)]
    if not steps:
        said, subgroup = rung.statistic, rung.subgroup
        first = times.parse_iso_time(subgroup["first"])
        steps = [Step(first, said["value"], said["lower"], said["upper"])]
    subgroup = rung.subgroup
    steps[-1] = replace(
        steps[-1],
        number=subgroup["number"],
        last=times.parse_iso_time(subgroup["last"]),
        size=subgroup["size"],
        mean=subgroup["mean"],
        signalled=True,
    )
    marked = counted(steps, len(steps) - 1, rung)
    first = next(index for index, step in enumerate(marked) if step.counts)
    if not isinstance(scheme, ShewhartPlan):
        # Of a sum or an average, what was before it came to zero or crossed the centre is a guess.
        marked = marked[max(0, first - 1) :]
    return Working(tuple(marked), len(marked) - 1, None if first else carried)


def _kept(evidence: Evidence, rung: Rung) -> list[Step]:
    """Steps of which the value is the mean, and no limit is known yet."""
    centre = rung.baseline.mean
    return [
        Step(first, mean, None, None, size=size, mean=mean, z=z)
        for first, z, size in zip(*evidence, strict=True)
        for mean in (centre + z * rung.error(size),)
    ]


def _charted(step: Step, rung: Rung) -> Step:
    scheme, rule = rung.detector.scheme, rule_of(rung)
    assert isinstance(scheme, ShewhartPlan)
    width = rule.width if rule is not None and rule.width else scheme.width
    limits = rung.chart().limits(step.size or 1, width)
    return replace(step, lower=limits.lower, upper=limits.upper)


def _summed(evidence: Evidence, scheme: CusumPlan, rung: Rung) -> tuple[list[Step], float | None]:
    """A sum forgets all that was before its last zero, so that it is found again to the last digit
    where that, or a restart, lies within what was kept."""
    towards = [clipped(z, scheme.clip) * rung.sign for z in evidence.z]
    head, said = scheme.head_start * scheme.h, rung.statistic["value"]
    newest = rung.error(rung.subgroup["size"])
    starts = [(0, 0.0), *((start, head) for start in range(len(towards)))]
    carried = None
    for start, before in starts:
        sums = _sums(towards[start:], before, scheme)
        if sums[-1] * newest == said:
            break
    else:
        start, gone = 0, math.fsum(towards) - len(towards) * scheme.k
        before = max(0.0, said / newest - gone)
        sums = _sums(towards, before, scheme)
        carried = before * newest
    return [
        replace(
            step,
            value=sums[index] * rung.error(step.size or 1),
            upper=scheme.h * rung.error(step.size or 1),
            terms={"added": towards[start + index] - scheme.k, "sum": sums[index]},
            signalled=sums[index] > scheme.h,
        )
        for index, step in enumerate(_kept(evidence, rung)[start:])
    ], carried


def _sums(towards: Sequence[float], before: float, scheme: CusumPlan) -> list[float]:
    sums = []
    for each in towards:
        before = max(0.0, before + each - scheme.k)  # in the detector's order, to the last digit
        sums.append(before)
        if before > scheme.h and not scheme.hold:
            before = scheme.head_start * scheme.h
    return sums


def _averaged(evidence: Evidence, scheme: EwmaPlan, rung: Rung) -> tuple[list[Step], float | None]:
    """An average forgets by the factor 1 − λ at each step: what it was before those that were kept
    follows from where it ended, unless it started afresh among them."""
    steps, centre = _kept(evidence, rung), rung.baseline.mean
    said = rung.statistic
    run = partial(_averages, scheme=scheme, rung=rung)
    close = partial(math.isclose, rel_tol=CLOSE, abs_tol=CLOSE * rung.error(1))
    upper = said["upper"] if said["upper"] is not None else math.inf
    for start in range(len(steps)):
        found = run(steps[start:], centre, 0.0)
        if close(found[-1].value, said["value"]) and close(found[-1].upper or 0.0, upper):
            return found, None
    left = (1.0 - scheme.lam) ** len(steps)
    fresh = replace(scheme, hold=True)  # it ran through, else it were found above
    ended = _averages(steps, centre, 0.0, scheme=fresh, rung=rung)[-1]
    before = centre + (said["value"] - ended.value) / left
    spread = [((each - centre) / scheme.width) ** 2 for each in (upper, ended.upper or 0.0)]
    variance = max(0.0, (spread[0] - spread[1]) / left**2)
    return _averages(steps, before, variance, scheme=fresh, rung=rung), before


def _averages(
    steps: Sequence[Step], average: float, variance: float, *, scheme: EwmaPlan, rung: Rung
) -> list[Step]:
    centre, lam = rung.baseline.mean, scheme.lam
    done = []
    for step in steps:
        error = rung.error(step.size or 1)
        weighted = lam * (centre + clipped(step.z or 0.0, scheme.clip) * error)
        kept = (1.0 - lam) * average
        average = weighted + kept
        if scheme.asymptotic:
            variance = lam / (2.0 - lam) * error * error
        else:
            variance = (lam * error) ** 2 + (1.0 - lam) ** 2 * variance
        reach = scheme.width * math.sqrt(variance)
        lower, upper = centre - reach, centre + reach
        # As the detector compares, to the last digit: where a clip equals the width, an average
        # that starts afresh comes to lie exactly on its limit.
        above, below = average > upper, average < lower
        outside = (above and scheme.direction != "down") or (below and scheme.direction != "up")
        done.append(
            replace(
                step,
                value=average,
                lower=lower,
                upper=upper,
                terms={"weighted": weighted, "kept": kept},
                signalled=outside,
            )
        )
        if outside and not scheme.hold:
            average, variance = centre, 0.0
    return done
