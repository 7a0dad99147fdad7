"""The sentence in an alert: what a technician should understand at three in the morning.

Knows plain words for rules, sides, sizes and times. Must not know how an alert is decided.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from monitor import times, units
from monitor.detectors import Signal
from monitor.detectors.charts import SPREAD
from monitor.lookback import Shift
from monitor.messages import EventKind
from monitor.plan import Judged

CAUTION = (
    "Isolate and lock out before reaching in; your site's rules come first. "
    "This is an advisory message, not a safety function."
)

_HARDLY = 0.01  # of the usual spread: a gauge that shows the same value again and again
_MOST_PLACES = 12
_PLAIN_BELOW = 1e12  # from there up a string of digits tells less than an exponent
_WITHDRAWN = {
    "gauge-restart": "is judged afresh because the gauge restarted",
    "configuration": "is no longer judged as it was because its configuration changed",
}


def subject(judged: Judged) -> str:
    """``Net weight, lane 1 head 4,``: the title up to its first comma, stream keys as declared."""
    plan, values = judged.plan, dict(judged.stream)
    declared = [key for _, key in plan.source.captures] + [key for key, _ in plan.source.stream]
    name = plan.title.split(",")[0].strip() or plan.name
    where = " ".join(f"{key} {values[key]}" for key in declared)
    return f"{name}, {where}," if where else name


class Finding(NamedTuple):
    """What an event tells of: a signal on a chart, and the shift behind it.

    ``error`` is the standard error of the subgroup that signalled, in the characteristic's unit.
    """

    signal: Signal
    chart: str
    shift: Shift | None
    error: float


def sentence(
    judged: Judged, event: EventKind, finding: Finding, time: int, reason: str | None = None
) -> str:
    """What happened, how much, since when, and the figures that decided it."""
    who = subject(judged)
    signal, chart = finding.signal, finding.chart
    if event == "returned-to-normal":
        return f"{who} has returned to normal: {_over(signal, chart)}."
    if event == "withdrawn":
        return f"{who} {_WITHDRAWN[reason or '']}: what was reported may still be there."
    again = " again" if event == "rejoined" else ""
    also = "now also: " if event == "updated" else ""
    change = _change(finding, judged.plan.unit, time, again)
    return f"{who} {change} ({also}{_figures(judged, finding)})."


def _change(finding: Finding, unit: str, time: int, again: str) -> str:
    signal, chart, shift, _ = finding
    if chart in SPREAD:
        more = "more" if signal.rule.endswith("upper") else "less"
        return f"varies {more} than usual{again}{_how_much(signal, time)}"
    if signal.direction is None:
        return {
            "alternation": f"goes up and down by turns{again}",
            "stratification": f"keeps closer to its centre than usual{again}",
            "mixture": f"keeps away from its centre{again}, as if two sources were mixed",
        }[signal.rule]
    moved, sign = ("risen", 1) if signal.direction == "up" else ("fallen", -1)
    size = sign * shift.size if shift else 0.0
    if shift is None or size <= 0.0:
        return f"has {moved}{again}"
    comma = "," if again else ""
    earlier = " or earlier" if shift.earliest is None else ""
    return (
        f"has {moved}{again}{comma} by about {_with_unit(_about(size), unit)} "
        f"since about {_clock(shift.onset, time)}{earlier}"
    )


def _how_much(signal: Signal, time: int) -> str:
    if signal.ratio is None or signal.onset is None:
        return ""
    times_usual = (
        f"about {_about(signal.ratio)} times its usual spread"
        if signal.ratio >= _HARDLY
        else "hardly at all"
    )
    return f": {times_usual} since about {_clock(signal.onset, time)}"


def _over(signal: Signal, chart: str) -> str:
    if chart in SPREAD:
        return "it varies as usual"
    if signal.direction is None:
        return "the pattern is gone"
    return "the rise is over" if signal.direction == "up" else "the fall is over"


def _figures(judged: Judged, finding: Finding) -> str:
    signal, chart, _, error = finding
    upper = signal.rule.endswith(("upper", "up"))
    limit = signal.upper if upper else signal.lower
    if chart == "variance":
        # Far below the usual variance a lower limit needs digits of its own.
        error = min(judged.baseline.sigma**2, limit or signal.upper or math.inf)
    scale = _Scale(units.of_chart(chart, judged.plan.unit), error)
    name = {"moving_range": "moving range", "individual": "value", "sd": "standard deviation"}.get(
        chart, chart
    )
    row = f"{signal.span} {name}s in a row"
    latest = f"the latest {scale.show(signal.value)}"
    beyond = "above" if upper else "below"
    match signal.rule.rsplit("-", 1)[0]:
        case "cusum":
            return scale.held(signal.statistic.replace("_", " "), signal.value, signal.upper)
        case "ewma":
            return scale.held("weighted average", signal.value, limit)
        case "outside":
            return scale.held(name, signal.value, limit)
        case "zone":
            count = f"{signal.needed} of the last {signal.span} {name}s"
            return f"{count} {beyond} {scale.show(limit or 0.0)}, {latest}"
        case "run":
            return f"{row} {beyond} {scale.show(judged.baseline.mean)}, {latest}"
        case "trend":
            return f"{row} {'rising' if upper else 'falling'}, {latest}"
        case "stratification":
            return f"{row} within {scale.band(signal)}, {latest}"
        case "mixture":
            return f"{row} outside {scale.band(signal)}, {latest}"
        case _:
            return f"{row}, {latest}"


class _Scale(NamedTuple):
    """Values in a unit, to as many digits as a standard error makes worth showing."""

    unit: str
    error: float

    @property
    def places(self) -> int:
        """Decimals: two significant digits of the standard error."""
        return max(0, 1 - math.floor(math.log10(self.error)))

    def show(self, value: float) -> str:
        """A value with its unit."""
        return _with_unit(_number(value, self.places), self.unit)

    def held(self, name: str, value: float, limit: float | None) -> str:
        """A value and the limit it broke, to as many digits as tell them apart."""
        if limit is None:
            return f"{name} {self.show(value)}"
        places = self.places
        while _number(value, places) == _number(limit, places) and places < _MOST_PLACES:
            places += 1
        held, against = (_with_unit(_number(x, places), self.unit) for x in (value, limit))
        return f"{name} {held}, limit {against}"

    def band(self, signal: Signal) -> str:
        """Both limits of a signal."""
        return f"{_number(signal.lower or 0.0, self.places)} to {self.show(signal.upper or 0.0)}"


def _number(value: float, places: int) -> str:
    if places > _MOST_PLACES or abs(value) >= _PLAIN_BELOW:
        return f"{value:.6g}"
    return f"{value:.{places}f}"


def _about(size: float) -> str:
    """Two significant digits, without an exponent where that is readable."""
    places = 1 - math.floor(math.log10(size))
    return (
        f"{size:.2g}"
        if abs(places) > _MOST_PLACES
        else _number(round(size, places), max(places, 0))
    )


def _with_unit(number: str, unit: str) -> str:
    return f"{number} {unit}".strip()


def _clock(moment: int, now: int) -> str:
    text = times.format_time(moment)
    day, clock = text[:10], text[11:19]
    return f"{clock} UTC" if moment // times.DAY == now // times.DAY else f"{day} {clock} UTC"
