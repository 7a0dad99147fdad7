"""Drifts at many places of a recording, and the subgroups that its readings then make.

Knows readings, onsets and subgrouping. Must not know detectors, or what a drift does to a value.

Drifts go into readings, never into means: what rounding, implausible values and subgrouping make of
them is part of the answer.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from monitor.plan import ByWindow, SubgroupPlan
from replay.readings import Places, Times, Values
from replay.subgrouping import spans, statistics
from replay.tuning.changed import Drift, drifted
from replay.tuning.grouped import Grouped, GroupedStream
from replay.tuning.stepping import Columns

ONSETS = 200
FEWEST = 50
"""Places below which no delay is told: of fewer, too few lie beyond the nine in ten."""

WARM = 300
"""Subgroups of undisturbed readings before each onset."""


class Onset(NamedTuple):
    """A drift begins with this reading of this stream, upwards (1) or downwards (−1)."""

    stream: int
    reading: int
    side: int


@dataclass(frozen=True, slots=True)
class Onsets:
    """Where drifts begin, how many readings they are followed, and the chances of rounding:
    ``chance`` (onsets, horizon), uniform from 0 to 1, the same for every setting."""

    places: tuple[Onset, ...]
    horizon: int
    chance: Values

    def apart(self, grouped: Grouped) -> int:
        """How many of them begin in a subgroup of their own: many places in next to no subgroups
        say no more than few."""
        return len({(o.stream, _own(grouped.streams[o.stream], o)) for o in self.places})


@dataclass(frozen=True, slots=True)
class Followed:
    """The subgroups from each onset on, as columns (steps, onsets), and for each the readings from
    the onset to its last one, and that one's instant (µs)."""

    columns: Columns
    readings: Places
    instant: Places


def onsets(grouped: Grouped, horizon: int, rng: np.random.Generator, count: int = ONSETS) -> Onsets:
    """``count`` onsets or a few more: as many in each stream, one in each of equal stretches of its
    last part, upwards and downwards in turn; none where a labelled cause acts."""
    each = -(-count // len(grouped.streams))
    places: list[Onset] = []
    for number, stream in enumerate(grouped.streams):
        first = (
            int(stream.start[stream.prove])
            if stream.prove < len(stream)
            else len(stream.readings.value)
        )
        last = len(stream.readings.value) - horizon
        if last <= first:
            continue
        edges = np.linspace(first, last, each + 1)
        for index, place in enumerate(edges[:-1] + rng.random(each) * np.diff(edges)):
            reading = int(place)
            group = int(np.searchsorted(stream.stop, reading, side="right"))
            end = int(np.searchsorted(stream.stop, reading + horizon, side="right"))
            if group < len(stream) and not stream.left_out[group : end + 1].any():
                places.append(Onset(number, reading, 1 if (index + number) % 2 == 0 else -1))
    return Onsets(tuple(places), horizon, rng.random((len(places), horizon)))


def before(grouped: Grouped, begun: Onsets) -> Columns:
    """The undisturbed subgroups before each onset's own, the latest last."""
    drifts = len(begun.places)
    table = _Table(WARM, drifts)
    for drift, onset in enumerate(begun.places):
        stream = grouped.streams[onset.stream]
        group = _own(stream, onset)
        restart = int(np.searchsorted(stream.restarts, group, side="right"))
        earliest = int(stream.restarts[restart - 1]) if restart else 0
        first = max(group - WARM, earliest)
        chosen = slice(first, group)
        table.put(
            slice(WARM - (group - first), WARM),
            drift,
            stream.n[chosen],
            stream.mean[chosen] - stream.centre,
            stream.sd[chosen] / stream.sigma,
            stream.error[chosen],
        )
    return table.columns()


def follow(grouped: Grouped, begun: Onsets, drift: Drift, horizon: int) -> Followed:
    """The subgroups that hold drifted readings, and what comes after, up to ``horizon`` readings
    from each onset."""
    cut = [_cut(grouped.streams[o.stream], o, min(horizon, begun.horizon)) for o in begun.places]
    length = np.array([len(each.value) for each in cut])
    edge = np.cumsum(length) - length
    which = np.repeat(np.arange(len(cut)), length)
    since = np.concatenate([each.since for each in cut])
    value = drifted(
        np.concatenate([each.value for each in cut]),
        since,
        np.array([o.side for o in begun.places])[which],
        np.array([grouped.streams[o.stream].centre for o in begun.places])[which],
        drift,
        begun.chance[which, np.clip(since, 0, begun.horizon - 1)],
    )
    instant = np.concatenate([each.time for each in cut])
    breaks = np.concatenate([each.breaks + at for each, at in zip(cut, edge, strict=True)])
    if not isinstance(grouped.plan, ByWindow):  # windows of two places lie apart as it is
        breaks = np.concatenate([edge, breaks])
    lower, upper = drift.plausible
    kept = (value >= lower) & (value <= upper)
    if not kept.all():
        breaks = np.concatenate(([0], np.cumsum(kept)))[breaks]
        which, since, instant, value = which[kept], since[kept], instant[kept], value[kept]
    breaks = np.unique(breaks)
    breaks = breaks[(breaks > 0) & (breaks < len(value))]
    made = spans(grouped.plan, instant + _apart(grouped.plan, instant, which), breaks)
    found = statistics(value, made)
    last = made.stop - 1
    own = which[last]
    good = (which[made.start] == own) & (since[last] >= 0)
    if isinstance(grouped.plan, ByWindow):
        good &= np.append(own[1:] == own[:-1], False)  # the last one may still have gone on
    n, mean, sd, last, own = found.n[good], found.mean[good], found.sd[good], last[good], own[good]
    counts = np.bincount(own, minlength=len(cut))
    row = np.arange(len(own)) - (np.cumsum(counts) - counts)[own]
    table = _Table(int(counts.max(initial=0)), len(cut))
    streams = np.array([o.stream for o in begun.places])[own]
    centre, sigma, between = (
        np.array([getattr(each, key) for each in grouped.streams])[streams]
        for key in ("centre", "sigma", "between")
    )
    table.put(row, own, n, mean - centre, sd / sigma, np.sqrt(between**2 + sigma**2 / n))
    readings = np.zeros((len(table), len(cut)), np.int64)
    at = np.zeros((len(table), len(cut)), np.int64)
    readings[row, own] = since[last] + 1
    at[row, own] = instant[last]
    return Followed(table.columns(), readings, at)


class _Cut(NamedTuple):
    """Readings around an onset: ``since`` counts from it, ``breaks`` from the first of them."""

    value: Values
    time: Times
    since: Places
    breaks: Places


def _own(stream: GroupedStream, onset: Onset) -> int:
    """The first subgroup with a reading from the onset on."""
    return int(np.searchsorted(stream.stop, onset.reading, side="right"))


def _cut(stream: GroupedStream, onset: Onset, horizon: int) -> _Cut:
    readings = stream.readings
    first = int(stream.start[_own(stream, onset)])
    end = min(onset.reading + horizon, len(readings.value))
    low, high = np.searchsorted(readings.breaks, (first + 1, end))
    return _Cut(
        readings.value[first:end],
        readings.time[first:end],
        np.arange(first - onset.reading, end - onset.reading),
        readings.breaks[low:high] - first,
    )


def _apart(plan: SubgroupPlan, instant: Times, which: Places) -> Times:
    """What puts the cuts one after another in time, each as if alone: whole windows, and longer
    than any time between subgroups."""
    unit = plan.window if isinstance(plan, ByWindow) else 1
    gap = unit if isinstance(plan, ByWindow) else max(plan.every or 0, plan.max_gap or 0)
    span = int(np.ptp(instant)) + 2 * gap + 1 if len(instant) else 1
    shift: Times = which * (-(-span // unit) * unit)
    return shift


class _Table:
    def __init__(self, steps: int, drifts: int) -> None:
        shape = (steps, drifts)
        self._away, self._error = np.zeros(shape), np.ones(shape)
        self._ratio, self._freedom = np.zeros(shape), np.zeros(shape)
        self._there: NDArray[np.bool_] = np.zeros(shape, np.bool_)

    def __len__(self) -> int:
        return len(self._away)

    def put(
        self,
        row: Places | slice,
        drift: Places | int,
        n: Places,
        away: Values,
        spread: Values,
        error: Values,
    ) -> None:
        """``spread`` is in multiples of sigma, nan for single readings."""
        self._away[row, drift] = away
        self._error[row, drift] = error
        self._ratio[row, drift] = np.where(n > 1, spread, 0.0) ** 2
        self._freedom[row, drift] = n - 1
        self._there[row, drift] = True

    def columns(self) -> Columns:
        return Columns(self._away, self._error, self._ratio, self._freedom, self._there)
