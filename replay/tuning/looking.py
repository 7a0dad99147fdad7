"""How a recording looks: its streams in few points, and its parts.

Knows readings. Must not know subgroups or detectors.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from monitor import stream_names
from replay.readings import StreamReadings
from replay.tuning.result import Outline, Part, StreamFound
from replay.tuning.running import Running

_POINTS = 200
_DRAWN = 50
"""Streams that are drawn; of more nobody looks at every one."""


def streams(readings: Sequence[StreamReadings]) -> tuple[StreamFound, ...]:
    """Every stream; those after the fiftieth without an outline."""
    none = Outline((), (), (), ())
    return tuple(
        StreamFound(
            stream_names.name(each.stream),
            len(each.value),
            outline(each) if number < _DRAWN else none,
        )
        for number, each in enumerate(readings)
    )


def outline(readings: StreamReadings) -> Outline:
    """The readings in equal stretches of time."""
    time, value = readings.time, readings.value
    first, last = int(time[0]), int(time[-1])
    edges = first + (np.arange(1, _POINTS) * ((last - first) / _POINTS)).astype(np.int64)
    cuts = np.concatenate(([0], np.searchsorted(time, edges), [len(time)]))
    middle, mean, low, high = [], [], [], []
    for begin, end in zip(cuts[:-1].tolist(), cuts[1:].tolist(), strict=True):
        if begin == end:
            continue
        part = value[begin:end]
        middle.append((int(time[begin]) + int(time[end - 1])) // 2)
        mean.append(float(part.mean()))
        lowest, highest = np.percentile(part, (1, 99)).tolist()
        low.append(lowest)
        high.append(highest)
    return Outline(tuple(middle), tuple(mean), tuple(low), tuple(high))


def part(readings: Sequence[StreamReadings], running: Running, first: int, last: int) -> Part:
    """What lies from one instant to another (µs), both included."""
    count = sum(
        int(np.searchsorted(each.time, last, "right") - np.searchsorted(each.time, first, "left"))
        for each in readings
    )
    begin, end = running.seconds(np.array([first, last])).tolist()
    return Part(first, last, end - begin, count)
