"""The points that made an alert ring, as a table for people.

Knows columns, digits, and how much of a long story is shown. Must not know where steps come from.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence

from monitor import times, units
from monitor.explaining.working import Rung, Step, Working
from monitor.plan import CusumPlan, EwmaPlan, ShewhartPlan

_BEFORE = 3
_BEGINNING, _END = 6, 24  # of a long story that much is shown
_MOST_PLACES = 12


class Table:
    """The steps that made it ring, some before and those after."""

    def __init__(self, working: Working, rung: Rung, unit: str) -> None:
        self._working, self._rung, self._unit = working, rung, unit
        places = max(0, 1 - math.floor(math.log10(rung.worth(rung.subgroup["size"]))))
        while places < _MOST_PLACES and any(
            step.counts and _look_equal(step, rung.sign, places) for step in working.steps
        ):
            places += 1
        self._places = places

    def lines(self) -> Iterator[str]:
        """Heading, rows, and where some are left out a line that says so."""
        titles, cells = zip(*self._columns(), strict=True)
        shown, left_out = self._shown()
        rows = [[cell(step) for cell in cells] for step in shown]
        widths = [max(map(len, column)) for column in zip(titles, *rows, strict=True)]
        yield self._line(titles, widths, "")
        for step, row in zip(shown, rows, strict=True):
            if step is left_out[0]:
                yield f"      … {left_out[1]:,} more; --json has them all"
            yield self._line(row, widths, self._mark(step))

    def _line(self, cells: Sequence[str], widths: Sequence[int], mark: str) -> str:
        text = "  ".join(cell.rjust(width) for cell, width in zip(cells, widths, strict=True))
        return f"    {text}  {mark}".rstrip()

    def _shown(self) -> tuple[list[Step], tuple[Step | None, int]]:
        steps, at = self._working.steps, self._working.at
        first = next(index for index, step in enumerate(steps) if step.counts)
        shown = list(steps[max(0, first - _BEFORE) :])
        more = at - first + 1 - _BEGINNING - _END
        if more <= 0:
            return shown, (None, 0)
        beginning = shown[: min(first, _BEFORE) + _BEGINNING]
        rest = shown[len(beginning) + more :]
        return beginning + rest, (rest[0], more)

    def _mark(self, step: Step) -> str:
        if step is self._working.rang:
            return "◀ rang"
        return "signalled" if step.signalled else "•" if step.counts else ""

    def _columns(self) -> Iterator[tuple[str, Callable[[Step], str]]]:
        rung = self._rung
        scheme = rung.detector.scheme
        unit = units.of_chart(scheme.chart, self._unit)
        unit = f", {unit}" if unit else ""
        yield "subgroup", lambda s: "" if s.number is None else f"{s.number}"
        yield "first reading", lambda s: self._clock(s.first)
        yield "n", lambda s: "" if s.size is None else f"{s.size}"
        match scheme:
            case CusumPlan(chart="variance"):
                yield f"variance{unit}", lambda s: self._number(s.terms.get("variance"))
                yield "/ usual", lambda s: _plain(s.terms.get("times_usual"))
                yield "added", lambda s: _signed(s.terms.get("added"))
                yield "sum", lambda s: _plain(s.terms.get("sum"))
                yield f"sum × usual{unit}", lambda s: self._number(s.value)
            case CusumPlan():
                added = f"{'−' if rung.sign < 0 else ''}z − k"
                yield f"mean{unit}", lambda s: self._number(s.mean)
                yield "z", lambda s: _signed(s.z)
                yield added, lambda s: _signed(s.terms.get("added"))
                yield "sum", lambda s: _plain(s.terms.get("sum"))
                yield f"sum × SE{unit}", lambda s: self._number(s.value)
            case EwmaPlan():
                weight = f"{scheme.lam:.4g}"
                yield f"mean{unit}", lambda s: self._number(s.mean)
                yield f"{weight} · mean", lambda s: self._number(s.terms.get("weighted"))
                yield "+ kept", lambda s: self._number(s.terms.get("kept"))
                yield "= average", lambda s: self._number(s.value)
            case ShewhartPlan():
                yield f"{charted(scheme.chart)}{unit}", lambda s: self._number(s.value)
        if not isinstance(scheme, CusumPlan):
            yield "lower", lambda s: self._number(s.lower)
            yield "upper", lambda s: self._number(s.upper)

    def _number(self, value: float | None) -> str:
        if value is None:
            return ""
        return f"{value:.6g}" if self._places > _MOST_PLACES else f"{value:.{self._places}f}"

    def _clock(self, moment: int) -> str:
        text = times.format_time(moment - moment % 1_000)
        same = moment // times.DAY == self._working.rang.first // times.DAY
        return text[11:23] if same else f"{text[:10]} {text[11:23]}"


def charted(name: str) -> str:
    """A chart's statistic, as people call it."""
    return {"moving_range": "moving range", "individual": "value", "sd": "standard deviation"}.get(
        name, name
    )


def _look_equal(step: Step, sign: int, places: int) -> bool:
    """Whether so few decimals hide on which side of its limit a value lies."""
    limit = step.upper if sign > 0 else step.lower
    return limit not in (None, step.value) and f"{step.value:.{places}f}" == f"{limit:.{places}f}"


def _signed(value: float | None) -> str:
    return "" if value is None else f"{value:+.2f}"


def _plain(value: float | None) -> str:
    return "" if value is None else f"{value:.2f}"
