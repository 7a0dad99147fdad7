"""A setting's signals against labelled events.

Knows labels and signals. Must not know detectors.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from replay.readings import Times
from replay.tuning.labels import Label
from replay.tuning.result import EventScore
from replay.tuning.running import Running


def score(
    labels: Sequence[Label], streams: Sequence[str], instants: Sequence[Times], running: Running
) -> EventScore | None:
    """``instants`` (µs) of signals, one rising array for each of ``streams``; None without
    labels."""
    if not labels:
        return None
    causes = [each for each in labels if each.what == "cause"]
    verdicts = [each for each in labels if each.what == "false"]
    late = []
    for label in causes:
        first = _first(label, streams, instants)
        if first is not None:
            begun, rung = running.seconds(np.array([label.begin, first])).tolist()
            late.append(max(rung - begun, 0.0))
    late.sort()
    avoided = sum(_first(each, streams, instants) is None for each in verdicts)
    return EventScore(
        causes=len(causes),
        caught=len(late),
        median_seconds=_point(late, 0.5),
        late_seconds=_point(late, 0.9),
        false_verdicts=len(verdicts),
        avoided=avoided,
    )


def _first(label: Label, streams: Sequence[str], instants: Sequence[Times]) -> int | None:
    found = []
    for stream, at in zip(streams, instants, strict=True):
        if label.concerns(stream):
            place = int(np.searchsorted(at, label.begin, side="left"))
            if place < len(at) and at[place] <= label.end:
                found.append(int(at[place]))
    return min(found, default=None)


def _point(rising: Sequence[float], probability: float) -> float | None:
    return rising[math.ceil(probability * len(rising)) - 1] if rising else None
