"""Which gauges stood still, when and for how long: for this takes readings, not subgroups.

Knows readings of streams. Must not know verdicts or words.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.methods.normal import Array
from monitor.methods.standstill import standstill
from monitor.plan import Stream

MUCH = 0.01
"""Of a stream's readings, from which on that is more than an incident."""


@dataclass(frozen=True, slots=True)
class Stuck:
    """The longest run of identical readings of ``stream``: ``readings`` of them in a row, from
    event time ``first`` to ``last`` (µs). ``runs`` such runs hold the ``share`` of its readings."""

    stream: Stream
    readings: int
    first: int
    last: int
    runs: int
    share: float

    @property
    def much(self) -> bool:
        """Whether so many readings were identical that the rest tells little of the gauge."""
        return self.share >= MUCH


def stuck(streams: Iterable[tuple[Stream, NDArray[np.int64], Array]]) -> tuple[Stuck, ...]:
    """Of streams with the event times (µs) and values of their readings, those that stood still,
    the one that did so most first."""
    found = []
    for stream, time, value in streams:
        run = standstill(value)
        if run is None:
            continue
        last = int(time[run.start + run.length - 1])
        share = run.values / len(value)
        found.append(Stuck(stream, run.length, int(time[run.start]), last, run.runs, share))
    return tuple(sorted(found, key=lambda each: -each.share))
