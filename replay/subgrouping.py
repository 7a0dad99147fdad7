"""Rational subgroups over arrays of readings: those that ``monitor.subgroups`` makes one by one.

Knows counting, gaps and windows. Must not know recordings, detectors or limits.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.plan import ByCount, ByWindow, SubgroupPlan
from replay.readings import Places, StreamReadings, Times, Values


@dataclass(frozen=True, slots=True)
class Spans:
    """Which readings make which subgroup: those from ``start`` up to, without, ``stop``.

    ``broken``: whether a gap or a gauge restart lies between the subgroup and the one before.
    ``abandoned``: how many subgroups were given up unfinished; what is still unfinished at the end
    of the readings is not among them.
    """

    start: Places
    stop: Places
    broken: NDArray[np.bool_]
    abandoned: int


@dataclass(frozen=True, slots=True)
class Statistics:
    """What subgroups say of their readings, in the gauge's unit; all of one length.

    ``sd`` (divisor n − 1) and ``range`` are nan where a subgroup is a single reading.
    """

    n: Places
    mean: Values
    sd: Values
    range: Values


@dataclass(frozen=True, slots=True)
class Subgroups:
    """The subgroups of one stream; ``first`` and ``last`` are the event times (µs) of the first
    and last reading of each."""

    spans: Spans
    statistics: Statistics
    first: Times
    last: Times

    def __len__(self) -> int:
        return len(self.last)


def subgroups(plan: SubgroupPlan, readings: StreamReadings) -> Subgroups:
    """The subgroups that the readings of one stream make under ``plan``."""
    found = spans(plan, readings.time, readings.breaks)
    return Subgroups(
        found,
        statistics(readings.value, found),
        readings.time[found.start],
        readings.time[found.stop - 1],
    )


def spans(plan: SubgroupPlan, time: Times, breaks: Places) -> Spans:
    """Which readings, at event times that never fall, make which subgroup."""
    if isinstance(plan, ByWindow):
        return _by_window(plan, time, breaks)
    if plan.max_gap is not None:
        breaks = np.union1d(breaks, np.flatnonzero(np.diff(time) > plan.max_gap) + 1)
    if plan.every is not None:
        return _every(plan.size, plan.every, time, breaks)
    return _by_count(plan, len(time), breaks)


def statistics(value: Values, spans: Spans) -> Statistics:
    """Mean, standard deviation and range of each subgroup."""
    start, stop = spans.start, spans.stop
    n = stop - start
    if not len(n):
        none = np.empty(0)
        return Statistics(n, none, none, none)
    mean = _reduced(np.add, value, start, stop) / n
    single = n < 2
    own = np.repeat(mean, n)
    if n.sum() == len(value):
        deviation = value - own
    else:
        # Readings between subgroups belong to none; they stay zero and are never added.
        deviation = np.zeros(len(value))
        used = np.repeat(start - np.cumsum(n) + n, n) + np.arange(len(own))
        deviation[used] = value[used] - own
    squares = _reduced(np.add, deviation * deviation, start, stop)
    sd = np.sqrt(squares / np.maximum(n - 1, 1))
    spread = _reduced(np.maximum, value, start, stop) - _reduced(np.minimum, value, start, stop)
    sd[single] = spread[single] = np.nan
    return Statistics(n, mean, sd, spread)


def _reduced(how: np.ufunc, value: Values, start: Places, stop: Places) -> Values:
    """``how`` over value[start:stop], for each pair; the pairs rise and none is empty."""
    if stop[-1] < len(value):
        edges = np.column_stack((start, stop)).ravel()
    else:
        edges = np.column_stack((start, stop)).ravel()[:-1]  # the end needs no edge of its own
    reduced: Values = how.reduceat(value, edges)[::2]
    return reduced


def _by_count(plan: ByCount, count: int, breaks: Places) -> Spans:
    begin = np.concatenate(([0], breaks)).astype(np.int64)
    length = np.diff(np.append(begin, count))
    whole = length // plan.size
    before = np.cumsum(whole) - whole
    start = np.repeat(begin - before * plan.size, whole) + np.arange(whole.sum()) * plan.size
    # The last run may still go on.
    given_up = int(np.count_nonzero(length[:-1] % plan.size))
    stop = start + plan.size
    return Spans(start, stop, _broken(start, stop, breaks), given_up)


def _every(size: int, every: int, time: Times, breaks: Places) -> Spans:
    count = len(time)
    allowed = np.searchsorted(time, time + every).tolist()
    after = np.searchsorted(breaks, np.arange(count), side="right")
    next_break = np.append(breaks, count + size)[after].tolist()
    starts: list[int] = []
    at, given_up = 0, 0
    while at < count:
        end = at + size
        if next_break[at] < end:
            given_up += 1
            end = next_break[at]
        elif end > count:
            break
        else:
            starts.append(at)
        at = max(end, allowed[at])
    start = np.array(starts, np.int64)
    stop = start + size
    return Spans(start, stop, _broken(start, stop, breaks), given_up)


def _by_window(plan: ByWindow, time: Times, breaks: Places) -> Spans:
    window = time // plan.window
    opens = np.flatnonzero(np.diff(window)) + 1
    edges = np.union1d(np.concatenate(([0], opens)), breaks).astype(np.int64)
    if not len(time):
        edges = edges[:0]
    start, stop = edges[:-1], edges[1:]  # the last window may still go on
    # A restart gives up what the window that was open held until then.
    cut = np.isin(stop, breaks)
    good = ~cut & (stop - start >= plan.min_size)
    start, stop = start[good], stop[good]
    return Spans(start, stop, np.zeros(len(start), np.bool_), int(np.count_nonzero(~good)))


def _broken(start: Places, stop: Places, breaks: Places) -> NDArray[np.bool_]:
    """Whether a break lies after the subgroup before, up to the subgroup's own first reading."""
    before = np.concatenate(([1], stop[:-1])) if len(stop) else stop
    broken: NDArray[np.bool_] = np.searchsorted(breaks, before) < np.searchsorted(
        breaks, start, side="right"
    )
    return broken
