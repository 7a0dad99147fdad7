"""A detector's run lengths beside the floor: what ``design`` answers, as data.

Knows run lengths and the floor. Must not know the command line or how it is shown.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from monitor import runlengths
from monitor.configuration.presets import OUTSIDE_LIMITS
from monitor.plan import CusumPlan, EwmaPlan, Scheme, ShewhartPlan
from monitor.runlengths import RunLength


@dataclass(frozen=True, slots=True)
class Line:
    """What happens at one shift; ``floor`` is None where there is none to compare with."""

    shift: float
    run_length: RunLength
    floor: float | None


@dataclass(frozen=True, slots=True)
class Design:
    """A scheme and its lines, by shift.

    ``interval`` is its run length at the shift ``off``; ``told`` is the size of shift worth telling
    first; ``rules`` the preset of a Shewhart chart; ``rate`` in subgroups a second, None where it
    was not given.
    """

    scheme: Scheme
    lines: tuple[Line, ...]
    interval: RunLength
    off: float
    told: float
    rules: str = OUTSIDE_LIMITS
    rate: float | None = None


def design(
    scheme: Scheme,
    shifts: Sequence[float],
    *,
    ignore: float = 0.0,
    told: float = 1.0,
    rules: str = OUTSIDE_LIMITS,
    rate: float | None = None,
) -> Design:
    """Run lengths of ``scheme`` at each of ``shifts``, in standard errors, and the floor for the
    interval that the scheme itself has while the mean is off by ``ignore``."""
    off = 0.0 - ignore if scheme.direction == "down" else ignore
    interval = runlengths.run_length(scheme, off)
    lines = tuple(
        Line(
            shift,
            runlengths.run_length(scheme, shift),
            runlengths.floor(shift, interval.subgroups, ignore=ignore, direction=scheme.direction),
        )
        for shift in sorted({shift + 0.0 for shift in shifts})  # -0.0 is 0.0
    )
    return Design(scheme, lines, interval, off, told, rules, rate)


def as_json(found: Design) -> dict[str, Any]:
    """Settings as a detector's keys in the configuration; a run length too long for a number, and a
    floor that does not exist, are null."""
    return {
        "settings": settings(found),
        "run_lengths": [
            {"shift": line.shift, "run_length": _finite(line.run_length.subgroups)}
            | _error(line.run_length)
            for line in found.lines
        ],
        "floor": [{"shift": line.shift, "run_length": line.floor} for line in found.lines],
    }


def settings(found: Design) -> dict[str, Any]:
    """The detector as it would stand in a configuration."""
    scheme = found.scheme
    match scheme:
        case CusumPlan():
            keys: dict[str, Any] = {"k": scheme.k, "h": scheme.h, "head_start": scheme.head_start}
        case EwmaPlan():
            limits = "asymptotic" if scheme.asymptotic else "exact"
            keys = {"lambda": scheme.lam, "width": scheme.width, "limits": limits}
        case ShewhartPlan():
            keys = {"width": scheme.width, "rules": found.rules}
    kind = {CusumPlan: "cusum", EwmaPlan: "ewma", ShewhartPlan: "shewhart"}[type(scheme)]
    return {"kind": kind, **keys, "direction": scheme.direction}


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _error(found: RunLength) -> dict[str, float | None]:
    return {"standard_error": _finite(found.standard_error)} if found.standard_error else {}
