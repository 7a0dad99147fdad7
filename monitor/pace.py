"""How often subgroups come and how large they are, as far as a plan can tell.

Knows expected rates, windows and counts. Must not know charts. How many streams there are only the
readings can tell, unless they are named one by one or there is but one.
"""

from __future__ import annotations

from dataclasses import dataclass

from monitor import times
from monitor.plan import ByCount, ByWindow, CharacteristicPlan


@dataclass(frozen=True, slots=True)
class Pace:
    """``seconds`` from one subgroup to the next: in ``each`` stream, or in all of them together."""

    seconds: float
    each: bool = False


def keys(plan: CharacteristicPlan) -> list[str]:
    """The stream keys, sorted."""
    source = plan.source
    return sorted([key for _, key in source.captures] + [key for key, _ in source.stream])


def streams(plan: CharacteristicPlan) -> int | None:
    """How many streams are judged; None where nobody can know."""
    if not keys(plan):
        return 1
    return len(plan.by_stream) if plan.judgement is None else None


def least_streams(plan: CharacteristicPlan) -> int:
    """How many there will be at least: a key that has one value only would not have been written."""
    return streams(plan) or max(2 ** len(keys(plan)), len(plan.by_stream))


def size(plan: CharacteristicPlan) -> int:
    """Readings in a usual subgroup; the fewest it may have where that is unknown."""
    subgroup = plan.subgroup
    if isinstance(subgroup, ByCount):
        return subgroup.size
    return max(subgroup.min_size, round(in_window(plan) or 0))


def in_window(plan: CharacteristicPlan) -> float | None:
    """Expected readings of one stream in a window; None where that is unknown."""
    subgroup, rate, count = plan.subgroup, plan.source.expected_rate, streams(plan)
    if not isinstance(subgroup, ByWindow) or rate is None or count is None:
        return None
    return rate * subgroup.window / times.SECOND / count


def takes(plan: CharacteristicPlan) -> float | None:
    """Seconds in which all streams together send the readings of one subgroup."""
    subgroup, rate = plan.subgroup, plan.source.expected_rate
    if isinstance(subgroup, ByWindow):
        return subgroup.window / times.SECOND
    return None if rate is None else subgroup.size / rate


def pace(plan: CharacteristicPlan) -> Pace | None:
    """How often subgroups come; None without an expected rate, a window or ``every``."""
    subgroup, gathering, count = plan.subgroup, takes(plan), streams(plan)
    if isinstance(subgroup, ByCount) and subgroup.every is None:
        return None if gathering is None else Pace(gathering)
    if isinstance(subgroup, ByWindow):
        seconds = subgroup.window / times.SECOND
    else:
        # One that takes longer than that to gather is followed by the next at once.
        seconds = max((subgroup.every or 0) / times.SECOND, (gathering or 0.0) * (count or 1))
    return Pace(seconds, each=True) if count is None else Pace(seconds / count)
