"""Which settings come first: those that keep their part of the promise, by how late they catch.

Knows finished settings. Must not know how they were judged.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Literal

from monitor.configuration import spans
from replay.tuning.result import Delay, Result, Setting, Shown


def ranked(settings: Sequence[Setting], catch: float) -> list[tuple[int, Setting]]:
    """Settings with their places in ``settings``: ranked ones of the mean first, then those of the
    spread, which are ranked among themselves, then the others as they came."""
    groups: dict[tuple[bool, bool], list[int]] = {}
    for index, each in enumerate(settings):
        groups.setdefault((_why_not(each, catch) != "", each.of_spread), []).append(index)
    found = []
    for unranked, of_spread in ((False, False), (False, True)):
        chosen = groups.get((unranked, of_spread), [])
        chosen.sort(key=lambda index: _key(settings[index], catch))
        found += [
            (index, replace(settings[index], rank=place, unranked=""))
            for place, index in enumerate(chosen, 1)
        ]
    for index in sorted(groups.get((True, False), []) + groups.get((True, True), [])):
        each = settings[index]
        found.append((index, replace(each, rank=None, unranked=_why_not(each, catch))))
    return found


def to_take(settings: Sequence[Setting]) -> tuple[int | None, int | None]:
    """The places of the best setting of ranked ``settings``, and of the best of the spread that can
    stand beside it: on the same subgroups, and held against the same baseline."""
    if not settings or settings[0].of_spread or settings[0].rank is None:
        return None, None
    best = settings[0]
    beside = (
        place
        for place, each in enumerate(settings)
        if each.of_spread
        and each.rank is not None
        and each.grouping == best.grouping
        and (each.origin == "configured") == (best.origin == "configured")
    )
    return 0, next(beside, None)


def at_catch(shown: Shown, catch: float) -> Delay | None:
    """The delay after a step of that size."""
    return next((d for d in shown.delays if d.shape == "step" and d.amount == catch), None)


def at_spread(shown: Shown) -> Delay | None:
    """The delay after the spread that was put in."""
    return next((d for d in shown.delays if d.shape == "spread"), None)


def that_ranks(setting: Setting, catch: float) -> Delay | None:
    """The delay that the setting is ranked by."""
    return at_spread(setting) if setting.of_spread else at_catch(setting, catch)


def has_interval(result: Result, grouping: int) -> bool:
    """Whether an interval is told for any setting on the grouping of that number."""
    return any(s.grouping == grouping and s.extrapolated is not None for s in result.settings)


def keeps(shown: Shown) -> Literal["yes", "no", "not shown"]:
    """Whether it rings no more often than it is asked to: "no" where all of an interval is shorter,
    "not shown" where the recording leaves it open."""
    if shown.meets:
        return "yes"
    told = (shown.observed.interval, shown.extrapolated and shown.extrapolated.interval)
    short = any(found and found.high is not None and found.high < shown.asked for found in told)
    return "no" if short else "not shown"


def _why_not(setting: Setting, catch: float) -> str:
    delay = that_ranks(setting, catch)
    if not setting.meets:
        seen = setting.observed
        if seen.interval and seen.interval.high is not None and seen.interval.high < setting.asked:
            times = "once" if seen.alarms == 1 else f"{seen.alarms:,} times"
            return f"it rang {times} in {spans.long(seen.seconds)}"
        if setting.extrapolated is None:
            return setting.no_interval
        if setting.extrapolated.interval.high is None:
            return "the recording is too short to show that it keeps the promise"
        return "the lower end of its interval is shorter than what is asked of it"
    if delay is None:
        return "the recording is too short to tell how late it catches a drift"
    if delay.late_readings.value is None:
        return "it missed more than one in ten of the drifts while they were followed"
    return ""


def _key(setting: Setting, catch: float) -> tuple[float, float]:
    delay = that_ranks(setting, catch)
    if delay is None:
        return math.inf, math.inf
    late, median = delay.late_readings.value, delay.median_readings.value
    return math.inf if late is None else late, math.inf if median is None else median
