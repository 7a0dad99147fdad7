"""How soon a detector catches what it was asked to catch, by the textbook: independent, normal.

Counted from a fresh start of the detector at the drift's beginning. Knows run lengths and pace.
Must not know words.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

from monitor import runlengths
from monitor.configuration import pace
from monitor.detectors.charts import SPREAD, standard_error
from monitor.plan import ByCount, CharacteristicPlan, DetectorPlan, Scheme

HALF, NINE_OF_TEN = 0.5, 0.9


@dataclass(frozen=True, slots=True)
class Delay:
    """From the drift's beginning to the signal: ``subgroups`` and readings (``pieces``) of its
    stream, whether they are judged or not; ``seconds`` is None where nobody knows the pace."""

    subgroups: float
    pieces: float
    seconds: float | None


@dataclass(frozen=True, slots=True)
class Catching:
    """Of a lasting ``drift`` in the gauge's unit, or of a spread ``ratio`` times the usual: the
    delay that half of all cases stay within, and the one that nine of ten do."""

    drift: float | None
    ratio: float | None
    half: Delay
    nine_of_ten: Delay


def of_detector(plan: CharacteristicPlan, detector: DetectorPlan) -> Catching | None:
    """None where it was not asked to catch anything, or where that is too much to compute.

    A Shewhart chart without a drift of its own is held against the smallest that the others of its
    characteristic are to catch.
    """
    intent, size, scheme = detector.intent, pace.size(plan), detector.scheme
    _, judgement = plan.example()
    if intent is None or judgement is None:
        return None
    drift, ratio, shift = None, intent.catch_ratio, 0.0
    if intent.chart not in SPREAD:
        asked = [each.intent.catch for each in judgement.detectors if each.intent is not None]
        drift = intent.catch or min((each for each in asked if each is not None), default=None)
        if drift is not None:
            shift = drift / standard_error(judgement.baseline, size)
            shift = -shift if intent.direction == "down" else shift
    if drift is None and ratio is None:
        return None
    if ratio is not None and intent.direction == "down":
        ratio = min(ratio, 1 / ratio)  # either is meant, see runlengths.solve_variance
    found = [_quantile(scheme, shift, each, size, ratio or 1.0) for each in (HALF, NINE_OF_TEN)]
    half, nine = (None if each is None else _delay(plan, each, size) for each in found)
    return None if half is None or nine is None else Catching(drift, ratio, half, nine)


@lru_cache(maxsize=1024)
def _quantile(
    scheme: Scheme, shift: float, probability: float, size: int, ratio: float
) -> float | None:
    try:
        found = runlengths.quantile(scheme, shift, probability, size=size, ratio=ratio)
    except ValueError:
        return None
    return found if math.isfinite(found) else None


def _delay(plan: CharacteristicPlan, subgroups: float, size: int) -> Delay:
    coming, count, rate = pace.pace(plan), pace.streams(plan), plan.source.expected_rate
    each = None
    if coming is not None and (coming.each or count is not None):
        each = coming.seconds if coming.each or count is None else coming.seconds * count
    subgroup, pieces = plan.subgroup, float(size)
    sharing = pace.sharing(plan)
    if isinstance(subgroup, ByCount) and subgroup.every is not None and rate and sharing and each:
        pieces = each * rate / sharing  # those between the subgroups as well
    return Delay(subgroups, subgroups * pieces, None if each is None else subgroups * each)
