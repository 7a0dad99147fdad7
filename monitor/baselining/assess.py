"""From subgroups to estimates and verdict, in one pure function.

Knows the order of the steps. Must not know files, words for people or where detectors come from.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from monitor.baselining.delivered import Delivered, delivered
from monitor.baselining.estimating import (
    BetweenBy,
    Estimate,
    SigmaBy,
    Values,
    behaving,
    estimate,
)
from monitor.baselining.material import Clues, StreamSubgroups
from monitor.baselining.outside import Found, outside
from monitor.baselining.reason import Reason, Word, word
from monitor.baselining.recording_reasons import skewed
from monitor.baselining.verdict import reasons
from monitor.plan import DetectorPlan, Stream


@dataclass(frozen=True, slots=True)
class Baselines:
    """What is to be written: a baseline for all streams, or one for each."""

    common: Values | None
    by_stream: Mapping[Stream, Values]

    def of(self, stream: Stream) -> Values:
        """The stream's own, or the common one."""
        own = self.by_stream.get(stream, self.common)
        assert own is not None
        return own


Detectors = Callable[[Baselines], Callable[[Stream], Sequence[DetectorPlan]]]
"""The detectors of a stream once it has such a baseline: constants may be solved from it."""


@dataclass(frozen=True, slots=True)
class Assessment:
    """Everything there is to say of a baseline. ``delivered`` is None where no run length can be
    computed; ``skipped`` are streams with too few subgroups to say anything of."""

    verdict: Word
    reasons: tuple[Reason, ...]
    baselines: Baselines
    estimate: Estimate
    outside: Found
    delivered: Delivered | None
    skipped: tuple[Stream, ...]


def baselines(estimate: Estimate) -> Baselines:
    """A stream a head where they differ, otherwise one for all."""
    if estimate.differ and len(estimate.each) > 1:
        return Baselines(None, estimate.by_stream)
    return Baselines(estimate.common, {})


def assess(
    streams: Sequence[StreamSubgroups],
    clues: Clues,
    detectors: Detectors,
    *,
    unit: str = "",
    left_out: int = 0,
    sigma: SigmaBy = "pooled",
    between: BetweenBy = "components",
) -> Assessment:
    """Judge the subgroups of one characteristic; ``left_out`` others were left out by hand.

    ValueError where no stream has two subgroups.
    """
    used = [each for each in streams if len(each) > 1]
    found = estimate(used, sigma, between)
    written = baselines(found)
    own = {each.stream: written.of(each.stream) for each in used}
    off = outside(used, own, clues.step)
    # How the process behaves shows in what lies inside: one event would pass for a habit.
    inside = [s.keeping(~flags) for s, flags in zip(used, off.flags, strict=True)]
    if off.points and all(len(each) > 1 for each in inside):
        found = behaving(found, estimate(inside, sigma, between))
        written = baselines(found)
    shrunk = None
    if all(each.values.sigma > 0 for each in found.each):
        skewness = found.shape.skewness if found.shape is not None and skewed(found) else 0.0
        shrunk = delivered(used, found, detectors(written), skewness)
    why = reasons(found, off, left_out, clues, shrunk, unit)
    skipped = tuple(each.stream for each in streams if len(each) < 2)
    return Assessment(word(why), why, written, found, off, shrunk, skipped)
