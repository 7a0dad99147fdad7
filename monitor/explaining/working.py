"""The arithmetic behind an alert: how the statistic came to break its limit, subgroup by subgroup.

Knows charts, sums and averages, from points that the engine made again. Must not know journals, or
how it is told.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import partial

from monitor.detectors.charts import Chart, chart, standard_error
from monitor.messages import AlertEvent, StatisticField, SubgroupField
from monitor.outputs import Points, Row
from monitor.plan import (
    BaselinePlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    RulePlan,
    ShewhartPlan,
)
from monitor.subgroups import Subgroup

CLOSE = 1e-9  # of a standard error: so far off is a mean that was kept standardised


@dataclass(frozen=True, slots=True)
class Step:
    """One subgroup as a detector saw it, in the characteristic's unit; None where it is not known.

    ``terms`` are what ``value`` is made of: a CUSUM's ``added`` and ``sum`` are in standard errors,
    an EWMA's ``weighted`` and ``kept`` in the unit; of the variance, ``variance`` and ``value`` are
    in the unit squared, ``times_usual``, ``added`` and ``sum`` in multiples of the baseline's.
    ``counts`` where it is part of what rang.
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
    terms: Mapping[str, float] = field(default_factory=dict)
    readings: tuple[float, ...] = ()
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

    def chart(self) -> Chart:
        """What a Shewhart chart's limits come from."""
        scheme = self.detector.scheme
        exact = isinstance(scheme, ShewhartPlan) and scheme.exact
        return chart(scheme.chart, self.baseline, exact)

    @property
    def is_squared(self) -> bool:
        """Whether what is charted is in the unit squared."""
        return self.detector.scheme.chart == "variance"

    def worth(self, size: int) -> float:
        """A difference worth showing, in what is charted."""
        if not self.is_squared:
            return self.error(size)
        said = self.statistic
        limit = said["lower"] if self.sign < 0 and said["lower"] is not None else said["upper"]
        return min(self.baseline.sigma**2, limit or math.inf)

    def summed(self) -> tuple[float, float]:
        """The k and h of the sum of variances that rang."""
        scheme = self.detector.scheme
        assert isinstance(scheme, CusumPlan)
        return next((k, h) for name, k, h in scheme.sums() if name == self.statistic["name"])


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
    close = partial(math.isclose, rel_tol=CLOSE, abs_tol=CLOSE * rung.worth(1))
    both = [(a, b) for a, b in pairs if a is not None and b is not None]
    return "to rounding" if len(both) > 1 and all(close(a, b) for a, b in both) else "no"


def from_points(points: Sequence[Points], rung: Rung) -> Working | None:
    """None where the subgroup that rang is not among them."""
    steps = [step for each in points if (step := _step(each, rung)) is not None]
    numbers = [step.number for step in steps]
    number = rung.subgroup["number"]
    if number not in numbers:
        return None
    return Working(tuple(counted(steps, numbers.index(number), rung)), numbers.index(number))


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
        readings=subgroup.values,
        signalled=rung.rule in row.rules,
    )
    match scheme:
        case CusumPlan(chart="variance"):
            return replace(step, terms=_of_variance(subgroup, row, rung, scheme))
        case CusumPlan():
            added = clipped(z, scheme.clip) * rung.sign - scheme.k
            return replace(step, terms={"added": added, "sum": row.value / error})
        case EwmaPlan():
            x = rung.baseline.mean + clipped(z, scheme.clip) * error
            weighted = scheme.lam * (subgroup.mean if scheme.clip is None else x)
            return replace(step, terms={"weighted": weighted, "kept": row.value - weighted})
        case ShewhartPlan():
            return _at_the_rule(step, row, subgroup.size, rung)


def _of_variance(subgroup: Subgroup, row: Row, rung: Rung, scheme: CusumPlan) -> dict[str, float]:
    usual, variance = rung.baseline.sigma**2, subgroup.variance or 0.0
    counts = (subgroup.size - 1) / ((scheme.size or subgroup.size) - 1)
    k, _ = rung.summed()
    return {
        "variance": variance,
        "times_usual": variance / usual,
        "added": rung.sign * counts * (variance / usual - k),
        "sum": row.value / usual,
    }


def _at_the_rule(step: Step, row: Row, size: int, rung: Rung) -> Step:
    """With the limits at the width of the rule that rang, where it has one."""
    rule = rule_of(rung)
    if rule is None or not rule.width:
        return step
    limits = rung.chart().limits(size, rule.width)
    return replace(step, lower=limits.lower, upper=limits.upper)


def counted(steps: Sequence[Step], at: int, rung: Rung) -> list[Step]:
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
    rule = rule_of(rung)
    span = 1 if rule is None else rule.length or rule.of or 1

    def counts(index: int, step: Step) -> bool:
        if not at - span < index <= at:
            return False
        return rule is None or rule.rule != "zone" or _beyond(step, rung.sign)

    return [replace(s, counts=counts(index, s)) for index, s in enumerate(steps)]


def _beyond(step: Step, sign: int) -> bool:
    limit = step.upper if sign > 0 else step.lower
    return limit is not None and (step.value - limit) * sign > 0.0


def rule_of(rung: Rung) -> RulePlan | None:
    """The rule of a Shewhart chart that rang: of its kind, with the limits that the alert names."""
    scheme, said = rung.detector.scheme, rung.statistic
    if not isinstance(scheme, ShewhartPlan):
        return None
    kind = rung.rule if rung.rule in _SIDELESS else rung.rule.rsplit("-", 1)[0]
    of_kind = [rule for rule in scheme.rules if rule.rule == kind]
    for rule in of_kind:
        width = rule.width or scheme.width
        limits = rung.chart().limits(rung.subgroup["size"], width)
        if (limits.lower, limits.upper) == (said["lower"], said["upper"]):
            return rule
    return of_kind[0] if of_kind else None


_SIDELESS = ("alternation", "stratification", "mixture")


def clipped(z: float, clip: float | None) -> float:
    """What of a standardised value counts."""
    return z if clip is None else min(max(z, -clip), clip)
