"""How often subgroups come and how large they are, as far as a plan can tell.

Knows expected rates, windows and counts. Must not know charts. How many streams there are only the
readings can tell, unless somebody wrote it down, named them one by one, or there is but one.
"""

from __future__ import annotations

from dataclasses import dataclass

from monitor import times
from monitor.plan import ByCount, ByWindow, CharacteristicPlan, SubgroupPlan


@dataclass(frozen=True, slots=True)
class Pace:
    """``seconds`` from one subgroup to the next: in ``each`` stream, or in all of them together."""

    seconds: float
    each: bool = False


def keys(plan: CharacteristicPlan) -> list[str]:
    """The stream keys, sorted."""
    source = plan.source
    return sorted([key for _, key in source.captures] + [key for key, _ in source.stream])


@dataclass(frozen=True, slots=True)
class Shared:
    """How many streams share the readings, and how many of them are judged; None where nobody can
    know."""

    sharing: int | None
    judged: int | None

    @property
    def parts(self) -> float:
        """Subgroups of all streams to one that is judged."""
        return 1.0 if self.sharing is None or self.judged is None else self.sharing / self.judged


def shared(keyed: bool, named: int, only_those: bool, expected: int | None) -> Shared:
    """Where ``named`` streams have a baseline of their own, and perhaps ``only_those`` have one;
    ``expected`` are as many as somebody wrote down. Without stream keys there is one."""
    if not keyed:
        return Shared(1, 1)
    if not (only_those and named):
        return Shared(expected, expected)
    return Shared(max(named, expected or 0), named)


def _shared(plan: CharacteristicPlan) -> Shared:
    learned = plan.learn is not None and plan.learn.adopt
    only_those = plan.judgement is None and not learned
    return shared(bool(keys(plan)), len(plan.by_stream), only_those, plan.source.expected_streams)


def streams(plan: CharacteristicPlan) -> int | None:
    """How many streams are judged, once all have learned their baselines; None where nobody can
    know."""
    return _shared(plan).judged


def sharing(plan: CharacteristicPlan) -> int | None:
    """How many streams share the readings; None where nobody can know."""
    return _shared(plan).sharing


def least_streams(plan: CharacteristicPlan) -> int:
    """How many there will be at least: nobody writes down a key that has one value only."""
    return sharing(plan) or max(2 ** len(keys(plan)), len(plan.by_stream))


def size(plan: CharacteristicPlan) -> int:
    """Readings in a usual subgroup; the fewest it may have where that is unknown."""
    return usual_size(plan.subgroup, plan.source.expected_rate, _shared(plan))


def in_window(plan: CharacteristicPlan) -> float | None:
    """Expected readings of one stream in a window; None where that is unknown."""
    subgroup = plan.subgroup
    if not isinstance(subgroup, ByWindow):
        return None
    return _in_window(subgroup, plan.source.expected_rate, _shared(plan).sharing)


def takes(plan: CharacteristicPlan) -> float | None:
    """Seconds in which all streams together send the readings of one subgroup."""
    subgroup, rate = plan.subgroup, plan.source.expected_rate
    if isinstance(subgroup, ByWindow):
        return subgroup.window / times.SECOND
    return None if rate is None else subgroup.size / rate


def pace(plan: CharacteristicPlan) -> Pace | None:
    """How often subgroups come; None without an expected rate, a window or ``every``."""
    return usual_pace(plan.subgroup, plan.source.expected_rate, _shared(plan))


def usual_size(subgroup: SubgroupPlan, rate: float | None, among: Shared) -> int:
    """``size`` of streams with so many readings a second together."""
    if isinstance(subgroup, ByCount):
        return subgroup.size
    return max(subgroup.min_size, round(_in_window(subgroup, rate, among.sharing) or 0))


def usual_pace(subgroup: SubgroupPlan, rate: float | None, among: Shared) -> Pace | None:
    """``pace`` of streams with so many readings a second together."""
    match subgroup:
        case ByCount():
            least, planned = subgroup.size, subgroup.every
        case ByWindow():
            least, planned = subgroup.min_size, subgroup.window
    # They cannot come faster than readings do.
    gathering = 0.0 if rate is None else least / rate * among.parts
    if planned is None:
        return Pace(gathering) if gathering else None
    if among.judged is None:
        return Pace(planned / times.SECOND, each=True)
    return Pace(max(planned / times.SECOND / among.judged, gathering))


def _in_window(subgroup: ByWindow, rate: float | None, count: int | None) -> float | None:
    if rate is None or count is None:
        return None
    return rate * subgroup.window / times.SECOND / count
