"""Whether the means of a process keep to a centre at all.

Knows variances of means over stretches of different length, and which test a length allows. Must
not know charts or baselines.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from monitor.methods import swings
from monitor.methods.f_ratio import f_sf
from monitor.methods.normal import Array

GROWTH = 1.5
"""VR over stretches four times as long may be larger by so much before it counts as wandering."""

LONG, SHORT = 200, 50
_FEWEST = 11
"""Degrees of freedom between the long ones; with fewer, swings tell more."""
_SURE = 0.01
_DOUBTFUL = {"stretches": 0.05, "swings": 0.02}
"""Both come about once in fifty where nothing wanders: the chance of stretches is overstated."""


@dataclass(frozen=True, slots=True)
class Wander:
    """``growth``: by how much what is slow varies more than what is quicker foretells; ``p``: the
    chance of such growth where it does not.

    By ``stretches``: means of ``long`` values against means of ``short`` ones. By ``swings``: those
    over ``long`` values or more against those over ``short`` to ``long``.
    """

    by: Literal["stretches", "swings"]
    short: int
    long: int
    growth: float
    p: float

    @property
    def wanders(self) -> bool:
        """Whether no frozen centre describes the process."""
        return self.growth > GROWTH and self.p < _SURE

    @property
    def may_wander(self) -> bool:
        """Whether it looks so, though chance may do that as well."""
        return self.growth > GROWTH and self.p < _DOUBTFUL[self.by]


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
    """Compares variance ratios over stretches of 200 and of 50, where the series have enough of
    them: where values follow each other only for a while both are alike, and a walk makes the one
    over longer stretches up to four times as large. Shorter series are judged by their swings.
    None where they are too short for that as well."""
    long_ratio, freedom = variance_ratio(series, LONG)
    short_ratio, short_freedom = variance_ratio(series, SHORT)
    if freedom >= _FEWEST and short_ratio:
        # The short stretches lie in the long ones: what is left of them is independent of those,
        # and the comparison with all of them errs on the side of saying nothing.
        growth = long_ratio / short_ratio
        return Wander("stretches", SHORT, LONG, growth, f_sf(growth, freedom, short_freedom))
    found = swings.swings(series)
    if found is None:
        return None
    longest = max(map(len, series))
    return Wander("swings", longest // swings.QUICK, longest // swings.SLOW, found.growth, found.p)
