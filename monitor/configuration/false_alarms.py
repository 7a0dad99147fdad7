"""How often each detector rings while nothing is wrong, by the textbook: independent, normal.

Nothing is wrong while the mean is off by no more than a detector was asked to ignore: what is said
here of such a detector is said of that drift. Knows run lengths and pace. Must not know words, or
how often is too often.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import lru_cache

from monitor import runlengths
from monitor.configuration import pace
from monitor.configuration.pace import Pace
from monitor.detectors.charts import standard_error
from monitor.plan import CharacteristicPlan, DetectorPlan, Scheme, ShewhartPlan

SHIFT = 8 * 3_600.0
"""Seconds of a crew's shift: the time by which people judge how often is too often."""


@dataclass(frozen=True, slots=True)
class Ringing:
    """Once in so many ``subgroups``, inf where never, None where it is too much to compute;
    and in so many ``seconds``, None where nobody knows how fast subgroups come."""

    subgroups: float | None
    seconds: float | None

    @property
    def in_a_shift(self) -> float | None:
        """How often in a shift; None where unknown."""
        return None if self.seconds is None else SHIFT / self.seconds


@dataclass(frozen=True, slots=True)
class DetectorRinging:
    """A detector as a whole, and each of a Shewhart chart's rules by itself."""

    whole: Ringing
    rules: tuple[Ringing, ...]


@dataclass(frozen=True, slots=True)
class Total:
    """False alarms in a shift: of those characteristics whose pace is known, together; of each
    stream of those whose number of streams is not; and why nothing can be said of the others."""

    together: float
    each_stream: dict[str, float]
    unknown: dict[str, str]


def of_detector(plan: CharacteristicPlan, detector: DetectorPlan) -> DetectorRinging:
    """How often it rings, in all streams together where ``pace`` can tell, else in each."""
    coming, size, scheme = pace.pace(plan), pace.size(plan), detector.scheme
    parts = (
        [replace(scheme, rules=(rule,)) for rule in scheme.rules]
        if isinstance(scheme, ShewhartPlan)
        else []
    )
    off = ignored(plan, detector, size)
    return DetectorRinging(
        _ringing(scheme, size, coming, off),
        tuple(_ringing(part, size, coming, off) for part in parts),
    )


def ignored(plan: CharacteristicPlan, detector: DetectorPlan, size: int) -> float:
    """The drift that it was asked to leave alone, in standard errors; towards where it watches."""
    if detector.intent is None:
        return 0.0
    _, judgement = plan.example()
    if judgement is None:
        return 0.0
    off = detector.intent.ignore / standard_error(judgement.baseline, size)
    return -off if detector.intent.direction == "down" else off


def of_characteristic(plan: CharacteristicPlan) -> float | None:
    """False alarms in a shift of all its detectors; None where one of them is unknown, or all are
    because the baseline is still to be learned.

    Rates add, which is a little too much for detectors that share their readings.
    """
    _, judgement = plan.example()
    if judgement is None:
        return None
    rates = [of_detector(plan, each).whole.in_a_shift for each in judgement.detectors]
    known = [rate for rate in rates if rate is not None]
    return math.fsum(known) if len(known) == len(rates) else None


def total(plans: tuple[CharacteristicPlan, ...]) -> Total:
    """False alarms of the whole configuration in a shift."""
    together: list[float] = []
    each_stream: dict[str, float] = {}
    unknown: dict[str, str] = {}
    for plan in plans:
        rate, coming = of_characteristic(plan), pace.pace(plan)
        if coming is None:
            unknown[plan.name] = "has no expected_rate"
        elif plan.example()[1] is None:
            unknown[plan.name] = "learns its baseline first"
        elif rate is None:
            unknown[plan.name] = "has a detector whose run length is too much to compute"
        elif coming.each:
            each_stream[plan.name] = rate
        else:
            together.append(rate)
    return Total(math.fsum(together), each_stream, unknown)


def _ringing(scheme: Scheme, size: int, coming: Pace | None, off: float) -> Ringing:
    subgroups = _run_length(scheme, size, off)
    if subgroups is None or coming is None:
        return Ringing(subgroups, None)
    return Ringing(subgroups, subgroups * coming.seconds)


@lru_cache(maxsize=1024)
def _run_length(scheme: Scheme, size: int, off: float) -> float | None:
    try:
        return runlengths.run_length(scheme, off, size=size).subgroups
    except ValueError:
        return None
