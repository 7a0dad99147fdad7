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
    """How many there will be at least: nobody writes down a key that has one value only."""
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
    count, rate = streams(plan), plan.source.expected_rate
    match plan.subgroup:
        case ByCount() as subgroup:
            least, planned = subgroup.size, subgroup.every
        case ByWindow() as window:
            least, planned = window.min_size, window.window
    gathering = 0.0 if rate is None else least / rate  # they cannot come faster than readings do
    if planned is None:
        return Pace(gathering) if gathering else None
    if count is None:
        return Pace(planned / times.SECOND, each=True)
    return Pace(max(planned / times.SECOND / count, gathering))
