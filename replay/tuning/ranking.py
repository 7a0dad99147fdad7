"""Which settings come first: those that keep the promise, by how late they catch.

Knows finished settings. Must not know how they were judged.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Literal

from replay.tuning.result import Delay, Result, Setting


def ranked(settings: Sequence[Setting], catch: float) -> list[tuple[int, Setting]]:
    """Settings with their places in ``settings``, ranked ones first, then the others as they
    came."""
    order = sorted(
        range(len(settings)),
        key=lambda i: (_why_not(settings[i], catch) != "", _key(settings[i], catch)),
    )
    found = []
    for place, index in enumerate(order, 1):
        each = settings[index]
        why = _why_not(each, catch)
        found.append((index, replace(each, rank=None if why else place, unranked=why)))
    return found


def at_catch(setting: Setting, catch: float) -> Delay | None:
    """The delay after a step of that size."""
    return next((d for d in setting.delays if d.shape == "step" and d.amount == catch), None)


def has_interval(result: Result, grouping: int) -> bool:
    """Whether an interval is told for any setting on the grouping of that number."""
    return any(s.grouping == grouping and s.extrapolated is not None for s in result.settings)


def keeps(setting: Setting, promise: float) -> Literal["yes", "no", "not shown"]:
    """Whether it rings no more often than once in ``promise`` seconds: "no" where all of an
    interval is shorter, "not shown" where the recording leaves it open."""
    if setting.meets:
        return "yes"
    told = (setting.observed.interval, setting.extrapolated and setting.extrapolated.interval)
    short = any(found and found.high is not None and found.high < promise for found in told)
    return "no" if short else "not shown"


def _why_not(setting: Setting, catch: float) -> str:
    if setting.chart == "variance":
        return "it watches the spread, not the mean"
    delay = at_catch(setting, catch)
    if not setting.meets:
        if setting.extrapolated is None:
            return setting.no_interval
        if setting.extrapolated.interval.high is None:
            return "the recording is too short to show that it keeps the promise"
        return "the lower end of its interval is shorter than the promise"
    if delay is None:
        return "the recording is too short to tell how late it catches a drift"
    if delay.late_readings.value is None:
        return "it missed more than one in ten of the drifts while they were followed"
    return ""


def _key(setting: Setting, catch: float) -> tuple[float, float]:
    delay = at_catch(setting, catch)
    if delay is None:
        return math.inf, math.inf
    late, median = delay.late_readings.value, delay.median_readings.value
    return math.inf if late is None else late, math.inf if median is None else median
