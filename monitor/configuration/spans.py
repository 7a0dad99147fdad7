"""Times and counts as people say them: ``45 s``, ``2.5 min``, ``12 days``.

Knows rounding. Must not know what is counted. Exact durations, as a configuration writes them, are
``times``.
"""

from __future__ import annotations

_DAY = 86_400.0
_YEAR = 365.25 * _DAY

NEVER = 1_000 * _YEAR
"""Seconds; nobody can tell what comes as seldom from what never comes."""

UNCOUNTED = 1e12
"""As many of anything as nobody sees: at ten a second they take over 3,000 years."""


def number(value: float) -> str:
    """Two digits, three of larger numbers: ``0.17``, ``14``, ``1,050,000``."""
    if value == 0 or 0.001 <= abs(value) < 99.5:  # above, two digits would write 1e+02
        return f"{value:.2g}"
    if abs(value) < 0.001:
        return "almost 0"
    return f"{float(f'{value:.3g}'):,.0f}" if abs(value) < 1e15 else f"{value:.1e}"


def short(seconds: float) -> str:
    """To three digits, in s, min or h."""
    if seconds < 120:
        return f"{seconds:.3g} s"
    return f"{seconds / 60:.3g} min" if seconds < 7_200 else f"{seconds / 3_600:.3g} h"


def long(seconds: float) -> str:
    """To two digits, from seconds to years."""
    for limit, unit, name in (
        (120.0, 1.0, "s"),
        (7_200.0, 60.0, "min"),
        (2 * _DAY, 3_600.0, "h"),
        (2 * _YEAR, _DAY, "days"),
    ):
        if seconds < limit:
            return f"{number(seconds / unit)} {name}"
    return f"{number(seconds / _YEAR)} years" if seconds < NEVER else "over 1,000 years"


def once(seconds: float, where: str, count: float, things: str) -> str:
    """How often something comes that comes after so many seconds, in which there are so many
    things: ``once in 12 days in each stream (2,070,000 subgroups)``."""
    span = f"{long(seconds)}{where}"
    if seconds < NEVER:
        return f"once in {span} ({number(count)} {things})"
    return f"practically never ({span})"


def once_among(count: float, things: str) -> str:
    """How often something comes that comes after so many things: ``once in 370 subgroups``."""
    if count < UNCOUNTED:
        return f"once in {number(count)} {things}"
    return f"practically never (over {UNCOUNTED:,.0f} {things})"
