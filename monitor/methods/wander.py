"""Whether the means of a process keep to a centre at all.

Knows variances of means over stretches of different length. Must not know charts or baselines.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from monitor.methods.f_ratio import f_sf
from monitor.methods.normal import Array

GROWTH = 1.5
"""VR over stretches four times as long may be larger by so much before it counts as wandering."""

LONG, SHORT = 200, 50
_STRETCHES = 12
"""Of the long ones, together: fewer cannot tell."""
_LEAST = 5
_SURE, _DOUBTFUL = 0.01, 0.05


@dataclass(frozen=True, slots=True)
class Wander:
    """Variance ratios VR(m) = m·var(means of m)/var over short stretches and ones ``long`` values
    long; ``p`` is the chance of such growth where the long ones add nothing."""

    short: int
    long: int
    short_ratio: float
    long_ratio: float
    p: float

    @property
    def wanders(self) -> bool:
        """Whether no frozen centre describes the process."""
        return self.long_ratio > GROWTH * self.short_ratio and self.p < _SURE

    @property
    def may_wander(self) -> bool:
        """Whether it looks so, though chance may do that as well."""
        return self.long_ratio > GROWTH * self.short_ratio and self.p < _DOUBTFUL


def variance_ratio(series: Sequence[Array], length: int) -> tuple[float, int]:
    """VR(``length``) of several series, each about its own mean, and its degrees of freedom.

    1 for independent values; for values that follow each other it grows to the inflation of their
    mean's variance, and levels off there unless they wander. (0, 0) where no series is long enough.
    """
    squares = all_squares = 0.0
    freedom = all_freedom = 0
    for each in series:
        count = len(each) // length
        if count < 2:
            continue
        used = each[: count * length]
        means = used.reshape(count, length).mean(axis=1)
        squares += float(((means - means.mean()) ** 2).sum())
        freedom += count - 1
        all_squares += float(((used - used.mean()) ** 2).sum())
        all_freedom += len(used) - 1
    if not freedom or not all_squares:
        return 0.0, 0
    return length * (squares / freedom) / (all_squares / all_freedom), freedom


def wander(series: Sequence[Array]) -> Wander | None:
    """Compares stretches of 200 with stretches of 50, or shorter ones, four to one, where the
    series are short; None where they are too short to tell. Stretches that follow each other only
    for a while leave VR level; a walk makes it grow fourfold."""
    total = sum(map(len, series))
    long = min(LONG, total // (_STRETCHES + len(series)))
    short = long * SHORT // LONG
    if short < _LEAST:
        return None
    long = short * LONG // SHORT
    long_ratio, freedom = variance_ratio(series, long)
    short_ratio, short_freedom = variance_ratio(series, short)
    if freedom < 2 or not short_ratio:
        return None
    # The short stretches lie in the long ones: what is left of them is independent of those, and
    # the comparison with all of them errs on the side of saying nothing.
    p = f_sf(long_ratio / short_ratio, freedom, short_freedom)
    return Wander(short, long, short_ratio, long_ratio, p)
