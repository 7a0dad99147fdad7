"""The arithmetic behind an alert: how the statistic came to break its limit, subgroup by subgroup.

Knows charts, sums and averages, from points that the engine made again or from what an alert kept.
Must not know journals, or how it is told.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

from monitor import times
from monitor.detectors.charts import chart, standard_error
from monitor.messages import AlertEvent, StatisticField, SubgroupField
from monitor.outputs import Evidence, Points, Row
from monitor.plan import (
    BaselinePlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    RulePlan,
    ShewhartPlan,
)

_OF_MEANS = ("mean", "individual")
_CLOSE = 1e-9  # of a standard error: what is left of a mean that was kept standardised


@dataclass(frozen=True, slots=True)
class Step:
    """One subgroup as a detector saw it, in the characteristic's unit; None where it is not known.

    ``terms`` are what ``value`` is made of: a CUSUM's ``added`` and ``sum`` are in standard errors,
    an EWMA's ``weighted`` and ``kept`` in the unit. ``counts`` where it is part of what rang.
    """

    first: int
    value: float
    lower: float | None
    upper: float | None
    number: int | None = None
    last: int | None = None
    size: int | None = None
    mean: float | None = None
    z: float | None = None
    terms: Mapping[str, float] | None = None
    counts: bool = False
    signalled: bool = False


@dataclass(frozen=True, slots=True)
class Working:
    """The steps, oldest first; ``steps[at]`` is the one at which it rang.

    ``carried`` is what a sum or average was before the first step, in the unit, where that is
    neither its zero nor its start.
    """

    steps: tuple[Step, ...]
    at: int
    carried: float | None = None

    @property
    def rang(self) -> Step:
        """The step at which it rang."""
        return self.steps[self.at]


@dataclass(frozen=True, slots=True)
class Rung:
    """What rang: a rule of a detector, against a baseline, at a subgroup."""

    detector: DetectorPlan
    baseline: BaselinePlan
    rule: str
    statistic: StatisticField
    subgroup: SubgroupField

    @classmethod
    def of(cls, event: AlertEvent, detector: DetectorPlan, baseline: BaselinePlan) -> Rung | None:
        """From an event; None where it tells of no subgroup."""
        statistic, subgroup = event["statistic"], event["subgroup"]
        if statistic is None or subgroup is None:
            return None
        return cls(detector, baseline, event["rule"], statistic, subgroup)

    @property
    def sign(self) -> int:
        """The side of the limit that was broken."""
        return -1 if self.rule.endswith(("lower", "down")) else 1

    def error(self, size: int) -> float:
        """The standard error of a subgroup's mean."""
        return standard_error(self.baseline, size)


def agreement(working: Working, rung: Rung) -> str:
    """Whether the arithmetic ends where the alert says: ``exactly``, ``to rounding`` or ``no``."""
    step, said = working.rang, rung.statistic
    pairs = (
        (step.value, said["value"]),
        (step.lower, said["lower"]),
        (step.upper, said["upper"]),
    )
    if all(ours == theirs for ours, theirs in pairs):
        return "exactly"
    close = partial(math.isclose, rel_tol=_CLOSE, abs_tol=_CLOSE * rung.error(1))
    both = [(a, b) for a, b in pairs if a is not None and b is not None]
    return "to rounding" if len(both) > 1 and all(close(a, b) for a, b in both) else "no"


# ── from points that the engine made again ───────────────────────────────────────────────────────


def from_points(points: Sequence[Points], rung: Rung) -> Working | None:
    """None where the subgroup that rang is not among them."""
    steps = [step for each in points if (step := _step(each, rung)) is not None]
    numbers = [step.number for step in steps]
    number = rung.subgroup["number"]
    if number not in numbers:
        return None
    return Working(tuple(_counted(steps, numbers.index(number), rung)), numbers.index(number))


def _step(points: Points, rung: Rung) -> Step | None:
    name, statistic = rung.detector.name, rung.statistic["name"]
    row = next((r for r in points.rows if (r.detector, r.statistic) == (name, statistic)), None)
    if row is None:
        return None
    subgroup, scheme = points.subgroup, rung.detector.scheme
    error = rung.error(subgroup.size)
    z = (subgroup.mean - rung.baseline.mean) / error
    step = Step(
        subgroup.first,
        row.value,
        row.lower,
        row.upper,
        subgroup.number,
        subgroup.last,
        subgroup.size,
        subgroup.mean,
        z,
        signalled=rung.rule in row.rules,
    )
    match scheme:
        case CusumPlan():
            added = _clipped(z, scheme.clip) * rung.sign - scheme.k
            return replace(step, terms={"added": added, "sum": row.value / error})
        case EwmaPlan():
            x = rung.baseline.mean + _clipped(z, scheme.clip) * error
            weighted = scheme.lam * (subgroup.mean if scheme.clip is None else x)
            return replace(step, terms={"weighted": weighted, "kept": row.value - weighted})
        case ShewhartPlan():
            return _at_the_rule(step, row, subgroup.size, rung)


def _at_the_rule(step: Step, row: Row, size: int, rung: Rung) -> Step:
    """With the limits at the width of the rule that rang, where it has one."""
    rule = _rule(rung)
    if rule is None or not rule.width:
        return step
    limits = chart(row.chart, rung.baseline).limits(size, rule.width)
    return replace(step, lower=limits.lower, upper=limits.upper)


# ── from what the alert kept ─────────────────────────────────────────────────────────────────────


def from_evidence(evidence: Evidence, rung: Rung) -> Working:
    """The same from the stream's last subgroups, of which only the means are kept: of a chart of
    anything else, the one point that rang."""
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
    return Working(tuple(_counted(steps, len(steps) - 1, rung)), len(steps) - 1, carried)


def _kept(evidence: Evidence, rung: Rung) -> list[Step]:
    """Steps of which the value is the mean, and no limit is known yet."""
    centre = rung.baseline.mean
    return [
        Step(first, mean, None, None, size=size, mean=mean, z=z)
        for first, z, size in zip(*evidence, strict=True)
        for mean in (centre + z * rung.error(size),)
    ]


def _charted(step: Step, rung: Rung) -> Step:
    scheme, rule = rung.detector.scheme, _rule(rung)
    assert isinstance(scheme, ShewhartPlan) and step.size is not None
    width = rule.width if rule is not None and rule.width else scheme.width
    limits = chart(scheme.chart, rung.baseline).limits(step.size, width)
    return replace(step, lower=limits.lower, upper=limits.upper)


def _summed(evidence: Evidence, scheme: CusumPlan, rung: Rung) -> tuple[list[Step], float | None]:
    """A sum forgets all that was before its last zero, so that it is found again to the last digit
    where that, or a restart, lies within what was kept."""
    added = [_clipped(z, scheme.clip) * rung.sign - scheme.k for z in evidence.z]
    head, said = scheme.head_start * scheme.h, rung.statistic["value"]
    newest = rung.error(rung.subgroup["size"])
    starts = [(0, 0.0), *((start, head) for start in range(len(added)))]
    carried = None
    for start, before in starts:
        sums = _sums(added[start:], before, scheme)
        if sums[-1] * newest == said:
            break
    else:
        start, before = 0, max(0.0, said / newest - math.fsum(added))
        sums = _sums(added, before, scheme)
        carried = before * newest
    return [
        replace(
            step,
            value=sums[index] * rung.error(step.size or 1),
            upper=scheme.h * rung.error(step.size or 1),
            terms={"added": added[start + index], "sum": sums[index]},
            signalled=sums[index] > scheme.h,
        )
        for index, step in enumerate(_kept(evidence, rung)[start:])
    ], carried


def _sums(added: Sequence[float], before: float, scheme: CusumPlan) -> list[float]:
    sums = []
    for each in added:
        before = max(0.0, before + each)
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
    close = partial(math.isclose, rel_tol=_CLOSE, abs_tol=_CLOSE * rung.error(1))
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
        weighted = lam * (centre + _clipped(step.z or 0.0, scheme.clip) * error)
        kept = (1.0 - lam) * average
        average = weighted + kept
        if scheme.asymptotic:
            variance = lam / (2.0 - lam) * error * error
        else:
            variance = (lam * error) ** 2 + (1.0 - lam) ** 2 * variance
        reach = scheme.width * math.sqrt(variance)
        outside = abs(average - centre) > reach
        done.append(
            replace(
                step,
                value=average,
                lower=centre - reach,
                upper=centre + reach,
                terms={"weighted": weighted, "kept": kept},
                signalled=outside,
            )
        )
        if outside and not scheme.hold:
            average, variance = centre, 0.0
    return done


# ── what made it ring ────────────────────────────────────────────────────────────────────────────


def _counted(steps: Sequence[Step], at: int, rung: Rung) -> list[Step]:
    """The steps, those marked that made it ring at ``steps[at]``."""
    match rung.detector.scheme:
        case CusumPlan():
            since = _since(steps, at, lambda step: step.value == 0.0)
        case EwmaPlan():
            centre, sign = rung.baseline.mean, rung.sign
            since = _since(steps, at, lambda step: (step.value - centre) * sign <= 0.0)
        case ShewhartPlan():
            return _met(steps, at, rung)
    return [replace(s, counts=since <= index <= at) for index, s in enumerate(steps)]


def _since(steps: Sequence[Step], at: int, is_over: Callable[[Step], bool]) -> int:
    """The first of the steps up to ``at`` without one between that is over, or that rang."""
    first = at
    while first > 0 and not is_over(steps[first - 1]) and not steps[first - 1].signalled:
        first -= 1
    return first


def _met(steps: Sequence[Step], at: int, rung: Rung) -> list[Step]:
    rule = _rule(rung)
    span = 1 if rule is None else rule.length or rule.of or 1

    def counts(index: int, step: Step) -> bool:
        if not at - span < index <= at:
            return False
        return rule is None or rule.rule != "zone" or _beyond(step, rung.sign)

    return [replace(s, counts=counts(index, s)) for index, s in enumerate(steps)]


def _beyond(step: Step, sign: int) -> bool:
    limit = step.upper if sign > 0 else step.lower
    return limit is not None and (step.value - limit) * sign > 0.0


def _rule(rung: Rung) -> RulePlan | None:
    """The rule of a Shewhart chart that rang: of its kind, with the limits that the alert names."""
    scheme, said = rung.detector.scheme, rung.statistic
    if not isinstance(scheme, ShewhartPlan):
        return None
    kind = rung.rule if rung.rule in _SIDELESS else rung.rule.rsplit("-", 1)[0]
    of_kind = [rule for rule in scheme.rules if rule.rule == kind]
    for rule in of_kind:
        width = rule.width or scheme.width
        limits = chart(scheme.chart, rung.baseline).limits(rung.subgroup["size"], width)
        if (limits.lower, limits.upper) == (said["lower"], said["upper"]):
            return rule
    return of_kind[0] if of_kind else None


_SIDELESS = ("alternation", "stratification", "mixture")


def _clipped(z: float, clip: float | None) -> float:
    return z if clip is None else min(max(z, -clip), clip)
