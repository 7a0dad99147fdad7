"""A design in words and in a table, for whoever will set the detector.

Knows plain words and how many digits are worth showing. Must not know how a figure was worked out.
"""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterator, Sequence

from monitor.configuration import spans
from monitor.plan import CusumPlan, EwmaPlan
from monitor.runlengths import RunLength
from replay.design import Design, settings

_WIDTH = 88
_NAMES = {"cusum": "CUSUM", "ewma": "EWMA", "shewhart": "Shewhart chart"}
_TIMES = (
    (365.25 * 86_400, "years"),
    (86_400.0, "d"),
    (3_600.0, "h"),
    (60.0, "min"),
    (1.0, "s"),
)

BASIS = (
    "Shifts are in standard errors, run lengths in subgroups. Textbook figures: independent "
    "normal values, counted from the detector's start. The floor is the CUSUM tuned to each "
    "shift, with the same interval between false alarms: no rule has a smaller worst-case delay, "
    "though from a fresh start an EWMA or a head start may come in below it."
)
"""What the figures are, and are not."""


def length(subgroups: float) -> str:
    """A run length to three digits or a subgroup; ``never`` where it is too long for a number."""
    if math.isinf(subgroups):
        return "never"
    if subgroups >= 1e9:
        return f"{subgroups:.3g}"
    if subgroups >= 1000:
        return f"{subgroups:,.0f}"
    return f"{subgroups:.{1 if subgroups >= 100 else 2}f}"


def span(seconds: float) -> str:
    """A time in the largest unit it fills, to three digits."""
    if math.isinf(seconds):
        return "never"
    if seconds >= spans.NEVER:
        return spans.long(seconds)
    unit, name = next((each for each in _TIMES if seconds >= each[0]), _TIMES[-1])
    return f"{seconds / unit:.3g} {name}"


def fragment(found: Design) -> str:
    """The detector as a line of the configuration."""
    given = ", ".join(f"{key}: {_short(value)}" for key, value in settings(found).items())
    return f"{{{given}}}"


def _short(value: object) -> str:
    return f"{value:.6g}" if isinstance(value, float) else str(value)


def table(found: Design) -> list[tuple[str, ...]]:
    """Header and rows, as they are printed."""
    header: tuple[str, ...] = ("shift", "run length", "floor")
    if found.rate is not None:
        header += ("in time", "floor in time")
    rows = [header]
    for line in found.lines:
        floor = "" if line.floor is None else length(line.floor)
        row: tuple[str, ...] = (f"{line.shift:g}", _with_error(line.run_length), floor)
        if found.rate is not None:
            at_floor = "" if line.floor is None else span(line.floor / found.rate)
            row += (span(line.run_length.subgroups / found.rate), at_floor)
        rows.append(row)
    return rows


def _with_error(found: RunLength) -> str:
    if not found.standard_error or math.isinf(found.standard_error):
        return length(found.subgroups)
    return f"{length(found.subgroups)} ±{found.standard_error:.2g}"


def lines(found: Design, speak: bool) -> Iterator[str]:
    """The whole answer; ``speak`` adds the sentence."""
    if speak:
        yield from textwrap.wrap(sentence(found), _WIDTH)
        yield ""
    yield fragment(found)
    yield ""
    yield from _aligned(table(found))
    yield ""
    yield from textwrap.wrap(BASIS, _WIDTH)


def _aligned(rows: Sequence[tuple[str, ...]]) -> Iterator[str]:
    """The table in columns of equal width, numbers to the right."""
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for row in rows:
        yield "  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True)).rstrip()


def sentence(found: Design) -> str:
    """What the detector delivers, as a colleague would say it."""
    name = _NAMES[settings(found)["kind"]]
    scheme = found.scheme
    if isinstance(scheme, CusumPlan):
        name += f" with k {scheme.k:.4g} and h {scheme.h:.4g}"
    elif isinstance(scheme, EwmaPlan):
        name += f" with λ {scheme.lam:.3g} and width {scheme.width:.4g}"
    else:
        name += f" of width {scheme.width:.4g}"
    quiet = f"while the mean is off by {found.off:g}" if found.off else "with nothing wrong"
    said = f"A {name} rings {_once(found)} {quiet}"
    caught = [line for line in found.lines if line.floor is not None and line.shift != found.off]
    if not caught:
        return f"{said}."
    told = min(caught, key=lambda line: abs(abs(line.shift) - found.told))
    unit = "standard error" if abs(told.shift) == 1 else "standard errors"
    after = f"{length(told.run_length.subgroups)} subgroups{_time(found, told.run_length)}"
    return (
        f"{said}. A shift of {told.shift:g} {unit} is caught after {after} on average; "
        f"the floor is {length(told.floor or math.nan)}."
    )


def _once(found: Design) -> str:
    subgroups = found.interval.subgroups
    if math.isinf(subgroups):
        return "never"
    count = f"{length(subgroups)} subgroups"
    if found.rate is None:
        seldom = subgroups >= spans.UNCOUNTED
        return f"practically never ({count})" if seldom else f"once in {count}"
    seconds = subgroups / found.rate
    if seconds >= spans.NEVER:
        return f"practically never ({span(seconds)}: {count})"
    return f"once in {count} ({span(seconds)})"


def _time(found: Design, run_length: RunLength) -> str:
    return "" if found.rate is None else f" ({span(run_length.subgroups / found.rate)})"
