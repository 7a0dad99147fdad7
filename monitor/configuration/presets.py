"""Rule sets that were published under a name, spelt out with their source.

Knows the rules as printed. Must not know charts or limits: the outer limit is the detector's own.
"""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from monitor.plan import RulePlan

OUTSIDE_LIMITS = "outside-limits"

_INNER: dict[str, tuple[RulePlan, ...]] = {
    # W. A. Shewhart 1931: a point outside the limits, nothing else.
    OUTSIDE_LIMITS: (),
    # Western Electric Company, Statistical Quality Control Handbook, 1956: the four tests for
    # instability on one half of the chart.
    "western-electric-1956": (
        RulePlan("zone", count=2, of=3, width=2.0),
        RulePlan("zone", count=4, of=5, width=1.0),
        RulePlan("run", length=8),
    ),
    # L. S. Nelson, "The Shewhart control chart: tests for special causes", J. Quality Technology 16
    # (1984), in the order of the paper.
    "nelson-1984": (
        RulePlan("run", length=9),
        RulePlan("trend", length=6),
        RulePlan("alternation", length=14),
        RulePlan("zone", count=2, of=3, width=2.0),
        RulePlan("zone", count=4, of=5, width=1.0),
        RulePlan("stratification", length=15, width=1.0),
        RulePlan("mixture", length=8, width=1.0),
    ),
}

PRESETS: tuple[str, ...] = tuple(_INNER)


def preset(name: str, width: float) -> tuple[RulePlan, ...]:
    """The rules of that name; ``width`` sets the outer limit, the inner ones are as published."""
    return (RulePlan("outside", width=width), *_INNER[name])


def as_written(rule: RulePlan) -> dict[str, Any]:
    """The keys that would stand in a list of rules."""
    return {key: value for key, value in asdict(rule).items() if value}
