"""Which streams moved, when, how far, and how that is said.

Knows cuts of a series in two, and which are brief. Must not know what follows from them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor import stream_names
from monitor.baselining.reason import second
from monitor.methods.normal import Array
from monitor.methods.split import split
from monitor.plan import Stream

BRIEF = 0.03
"""Of a stream, on the shorter side of a move, below which the rest may be used with reserve."""

_ALIKE = 0.5
"""A stream moved with the one that moved most where a cut explains half as much in it."""
_NAMED = 2
"""Streams that are named; more are counted."""


@dataclass(frozen=True, slots=True)
class Moved:
    """From event time ``time`` (µs) on, means of ``stream`` lay ``by`` (its unit) off those before:
    the best cut in two, whether the centre stepped or crept. On the shorter side of it, from
    ``begin`` to ``end`` (µs), lie ``share`` of its subgroups."""

    stream: Stream
    time: int
    by: float
    begin: int
    end: int
    share: float


Means = tuple[Stream, NDArray[np.int64], Array]
"""Of a stream: event times (µs) and means of its subgroups."""


def cut_at(means: Means, index: int) -> Moved:
    """The move of a stream at its subgroup ``index``."""
    stream, time, mean = means
    shorter = time[index:] if 2 * index >= len(time) else time[:index]
    by = float(mean[index:].mean() - mean[:index].mean())
    share = len(shorter) / len(time)
    return Moved(stream, int(time[index]), by, int(shorter[0]), int(shorter[-1]), share)


def most_moved(streams: Sequence[Means]) -> tuple[Moved, ...]:
    """Those that moved about as much as the one that moved most."""
    cuts = [(cut, each) for each in streams if (cut := split(each[2])) is not None]
    cuts.sort(key=lambda found: -found[0].share)
    return tuple(
        cut_at(each, cut.index) for cut, each in cuts if cut.share >= _ALIKE * cuts[0][0].share
    )


def told(moved: Sequence[Moved], unit: str) -> str:
    """Which streams, how far and when."""
    said = [
        f"{stream_names.name(each.stream) or 'the mean'} by {each.by:+.2g} {unit}".rstrip()
        + f" from about {second(each.time)} on"
        for each in moved[:_NAMED]
    ]
    more = len(moved) - len(said)
    return ", ".join(said) + (f", and {more_streams(more)}" if more else "")


def more_streams(count: int) -> str:
    """Those that are not named."""
    return "one more stream" if count == 1 else f"{count} more streams"


def widest(moved: Sequence[Moved]) -> float:
    """The largest share that lies on the shorter side."""
    return max(each.share for each in moved)


def shorter_side(moved: Sequence[Moved]) -> tuple[int, int]:
    """From when to when (µs), of the stream that moved most and those that did at the same end."""
    late = moved[0].begin == moved[0].time
    same = [each for each in moved if (each.begin == each.time) == late]
    return min(each.begin for each in same), max(each.end for each in same)
