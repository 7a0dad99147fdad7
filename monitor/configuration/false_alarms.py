"""How often each detector rings while nothing is wrong, by the textbook: independent, normal.

Knows run lengths and pace. Must not know words, or how often is too often.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import lru_cache

from monitor import runlengths
from monitor.configuration import pace
from monitor.configuration.pace import Pace
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
    return DetectorRinging(
        _ringing(scheme, size, coming), tuple(_ringing(part, size, coming) for part in parts)
    )


def of_characteristic(plan: CharacteristicPlan) -> float | None:
    """False alarms in a shift of all its detectors; None where one of them is unknown.

    Rates add, which is a little too much for detectors that share their readings.
    """
    _, judgement = plan.example()
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
        elif rate is None:
            unknown[plan.name] = "has a detector whose run length is too much to compute"
        elif coming.each:
            each_stream[plan.name] = rate
        else:
            together.append(rate)
    return Total(math.fsum(together), each_stream, unknown)


def _ringing(scheme: Scheme, size: int, coming: Pace | None) -> Ringing:
    subgroups = _run_length(scheme, size)
    if subgroups is None or coming is None:
        return Ringing(subgroups, None)
    return Ringing(subgroups, subgroups * coming.seconds)


@lru_cache(maxsize=1024)
def _run_length(scheme: Scheme, size: int) -> float | None:
    try:
        return runlengths.run_length(scheme, size=size).subgroups
    except ValueError:
        return None
