"""Which of many settings and streams a reader looks at first.

Knows ranks. Must not know HTML or charts.
"""

from __future__ import annotations

from collections.abc import Sequence

from replay.tuning.ranking import at_catch
from replay.tuning.result import Delay, Grouping, Result, Setting, Shape, Shown

_FEW = 8
_STREAMS = 8
_SHAPES: tuple[Shape, ...] = ("step", "ramp", "spread")


def few(result: Result) -> tuple[Setting, ...]:
    """The settings that are open to the eye: the first ones, the best, and what runs now."""
    taken = (result.best, result.best_spread)
    return tuple(
        setting
        for place, setting in enumerate(result.settings)
        if place < _FEW or place in taken or setting.origin == "configured"
    )[: 2 * _FEW]


def with_wholes(result: Result, settings: Sequence[Setting]) -> tuple[Shown, ...]:
    """Before ``settings`` what all configured detectors do together, and all of the fragment, where
    they are judged."""
    wholes = (result.together, result.proposed)
    return (*(each for each in wholes if each is not None), *settings)


def rest(result: Result) -> tuple[Setting, ...]:
    """The settings that ``few`` leaves out, in order."""
    shown = {setting.name for setting in few(result)}
    return tuple(setting for setting in result.settings if setting.name not in shown)


def best(result: Result) -> Setting | None:
    """The setting to take, if there is one."""
    return None if result.best is None else result.settings[result.best]


def best_spread(result: Result) -> Setting | None:
    """The setting to take for the spread, if there is one."""
    return None if result.best_spread is None else result.settings[result.best_spread]


def grouping(result: Result) -> Grouping | None:
    """The way of gathering readings whose baseline the page draws: that of the best setting, else
    of the first one."""
    if result.best is not None:
        return result.groupings[result.settings[result.best].grouping]
    if result.settings:
        return result.groupings[result.settings[0].grouping]
    return result.groupings[0] if result.groupings else None


def first_step(shown: Shown, result: Result) -> Delay | None:
    """The delay at the first size to catch, put in as a step."""
    return at_catch(shown, result.catch[0]) if result.catch else None


def drifts(settings: Sequence[Setting]) -> list[tuple[Shape, float]]:
    """Shapes and sizes of all drifts that were put in: steps first, small before large."""
    found = {(d.shape, d.amount) for s in settings for d in s.delays}
    return sorted(found, key=lambda drift: (_SHAPES.index(drift[0]), drift[1]))


def streams(result: Result) -> list[int]:
    """Places of the streams to draw: all where they are few, else those with most alarms of the
    best settings, then those furthest from their baseline."""
    if len(result.streams) <= _STREAMS:
        return list(range(len(result.streams)))
    alarms: dict[str, int] = {}
    for setting in few(result):
        for alarm in setting.alarms:
            alarms[alarm.stream] = alarms.get(alarm.stream, 0) + 1
    baselines = found.baselines if (found := grouping(result)) else ()

    def interest(place: int) -> tuple[float, float]:
        gone = 0.0
        if place < len(baselines) and baselines[place].sigma > 0:
            line = baselines[place]
            gone = abs(line.mean_proof - line.mean) / line.sigma
        return (-alarms.get(result.streams[place].stream, 0), -gone)

    return sorted(sorted(range(len(result.streams)), key=interest)[:_STREAMS])
