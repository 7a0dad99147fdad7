"""One reason for a verdict, and the verdict that reasons make together.

Knows three grades. Must not know what is demanded of a baseline.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

from monitor import times

Grade = Literal["refuse", "provisional", "note"]
Word = Literal["trust", "provisional", "refuse"]

_ORDER: tuple[Grade, ...] = ("refuse", "provisional", "note")


@dataclass(frozen=True, slots=True)
class Reason:
    """One thing that was found: how grave it is, a name for programs, what is so, what to do."""

    grade: Grade
    kind: str
    found: str
    do: str


def word(reasons: Iterable[Reason]) -> Word:
    """The verdict that the reasons make together."""
    grades = {reason.grade for reason in reasons}
    if "refuse" in grades:
        return "refuse"
    return "provisional" if "provisional" in grades else "trust"


def gravest_first(reasons: Iterable[Reason]) -> tuple[Reason, ...]:
    """The reasons in order of their grades."""
    return tuple(sorted(reasons, key=lambda reason: _ORDER.index(reason.grade)))


def second(instant: int) -> str:
    """An instant (µs) to the second at or before it, as options take it."""
    return f"{times.format_time(instant)[:19]}Z"


def second_after(instant: int) -> str:
    """The same, to the second at or after it."""
    return second(instant + times.SECOND - 1)


def part(share: float) -> str:
    """What is left of a promise: ``all``, ``3.7 %``, ``less than 0.1 %``."""
    if share >= 0.995:
        return "all"
    return "less than 0.1 %" if share < 0.001 else f"{100 * share:.2g} %"
