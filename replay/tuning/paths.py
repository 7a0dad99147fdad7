"""What every array detector gives: the peaks of its statistic, and its signals at a limit.

Knows indices of subgroups. Must not know any particular detector.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from replay.readings import Places, Values
from replay.tuning.grouped import GroupedStream


@dataclass(frozen=True, slots=True)
class Peaks:
    """The largest level of each cycle, from where the statistic left its rest (``begin``) to where
    it came back (``end``, without): three arrays of one length, in no particular order."""

    level: Values
    begin: Places
    end: Places


@dataclass(frozen=True, slots=True)
class Signals:
    """Where a stream's detector signalled: rising indices of subgroups, and whether upwards."""

    at: Places
    up: NDArray[np.bool_]


class Path(Protocol):
    """One detector's statistic over one stream."""

    def peaks(self) -> Peaks:
        """Of both sides, with nothing restarted."""

    def unit(self) -> float:
        """The standard deviation of levels, in that which limits suppose; 1 for sums."""

    def signals(self, limit: float) -> Signals:
        """Those of the engine's detector with that limit (h or width), restarts included."""


def segments(stream: GroupedStream) -> Iterator[tuple[int, int]]:
    """The stretches between restarts of the gauge, that detectors begin afresh in."""
    edges = [0, *(int(at) for at in stream.restarts if 0 < at < len(stream)), len(stream)]
    return ((a, b) for a, b in itertools.pairwise(edges) if a < b)


def in_order(at: list[int], up: list[bool]) -> Signals:
    """Signals by place; at one place upper before lower, as the engine gives them."""
    places = np.array(at, np.int64)
    sides = np.array(up, np.bool_)
    order = np.lexsort((~sides, places))
    return Signals(places[order], sides[order])


def jointly(peaks: list[Peaks]) -> Peaks:
    """The peaks of several sides or segments."""
    if not peaks:
        none = np.empty(0, np.int64)
        return Peaks(np.empty(0), none, none)
    return Peaks(
        np.concatenate([each.level for each in peaks]),
        np.concatenate([each.begin for each in peaks]),
        np.concatenate([each.end for each in peaks]),
    )
