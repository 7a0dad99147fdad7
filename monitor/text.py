"""The sentence in an alert: what a technician should understand at three in the morning.

Knows plain words for rules, sides, sizes and times. Must not know how an alert is decided.
"""

from __future__ import annotations

import math

from monitor import times
from monitor.detectors import Signal
from monitor.detectors.charts import SPREAD, standard_error
from monitor.lookback import Shift
from monitor.messages import EventKind
from monitor.outputs import Stream
from monitor.plan import CharacteristicPlan, Direction

CAUTION = (
    "Isolate and lock out before reaching in; your site's rules come first. "
    "This is an advisory message, not a safety function."
)

_WITHDRAWN = {"gauge-restart": "the gauge restarted and is judged afresh"}


def subject(plan: CharacteristicPlan, stream: Stream) -> str:
    """``Net weight, lane 1 head 4,``: the title up to its first comma, stream keys as declared."""
    values = dict(stream)
    declared = [key for _, key in plan.source.captures] + [key for key, _ in plan.source.stream]
    name = plan.title.split(",")[0].strip()
    where = " ".join(f"{key} {values[key]}" for key in declared)
    return f"{name}, {where}," if where else name


def quantity(value: float, plan: CharacteristicPlan) -> str:
    """A value with its unit, to two significant digits of the standard error."""
    error = standard_error(plan.baseline, plan.subgroup.size)
    places = min(max(0, 1 - math.floor(math.log10(error))), 12)
    return _with_unit(f"{value:.{places}f}", plan)


def sentence(
    plan: CharacteristicPlan,
    stream: Stream,
    event: EventKind,
    signal: Signal,
    chart: str,
    shift: Shift | None,
    time: int,
    reason: str | None = None,
) -> str:
    """What happened, how much, since when, and the figures that decided it."""
    who = subject(plan, stream)
    if event == "returned-to-normal":
        return f"{who} has returned to normal."
    if event == "withdrawn":
        return f"{who} is no longer alerted: {_WITHDRAWN[reason or '']}."
    again = " again" if event == "rejoined" else ""
    also = "now also: " if event == "updated" else ""
    figures = _figures(plan, signal, chart)
    return f"{who} {_change(plan, signal, chart, shift, time, again)} ({also}{figures})."


def _change(
    plan: CharacteristicPlan,
    signal: Signal,
    chart: str,
    shift: Shift | None,
    time: int,
    again: str,
) -> str:
    if chart in SPREAD:
        more = "more" if signal.rule.endswith("upper") else "less"
        return f"varies {more} than usual{again}"
    if signal.direction is None:
        return {
            "alternation": f"goes up and down by turns{again}",
            "stratification": f"stays closer to its centre than its baseline allows for{again}",
            "mixture": f"keeps away from its centre{again}, as if two sources were mixed",
        }[signal.rule]
    moved = _moved(signal.direction)
    if shift is None or shift.size * (1 if signal.direction == "up" else -1) <= 0:
        return f"has {moved}{again}"
    size = _about(abs(shift.size) * standard_error(plan.baseline, plan.subgroup.size))
    comma = "," if again else ""
    return (
        f"has {moved}{again}{comma} by about {_with_unit(size, plan)} "
        f"since about {_clock(shift.onset, time)}"
    )


def _figures(plan: CharacteristicPlan, signal: Signal, chart: str) -> str:
    name = {"moving_range": "moving range", "individual": "value"}.get(chart, chart)
    upper = signal.rule.endswith(("upper", "up"))
    limit = signal.upper if upper or signal.lower is None else signal.lower
    at = "" if limit is None else f"limit {quantity(limit, plan)}"
    value = quantity(signal.value, plan)
    beyond = "above" if upper else "below"
    rule = signal.rule.rsplit("-", 1)[0]
    if rule == "cusum":
        return f"{signal.statistic.replace('_', ' ')} {value}, {at}"
    if rule == "ewma":
        return f"weighted {name} {value}, {at}"
    if rule == "outside":
        return f"{name} {value}, {at}"
    if rule == "zone":
        count = f"{signal.needed} of the last {signal.span} {name}s"
        return f"{count} {beyond} {quantity(limit or 0.0, plan)}, the latest {value}"
    if rule == "run":
        centre = quantity(plan.baseline.mean, plan)
        return f"{signal.span} {name}s in a row {beyond} {centre}, the latest {value}"
    if rule == "trend":
        way = "rising" if upper else "falling"
        return f"{signal.span} {name}s in a row {way}, the latest {value}"
    return f"{signal.span} {name}s in a row, the latest {value}"


def _moved(direction: Direction) -> str:
    return "risen" if direction == "up" else "fallen"


def _about(size: float) -> str:
    """Two significant digits, never in exponents."""
    if size == 0.0:
        return "0"
    places = 1 - math.floor(math.log10(size))
    return f"{round(size, places):.{min(max(places, 0), 12)}f}"


def _with_unit(number: str, plan: CharacteristicPlan) -> str:
    return f"{number} {plan.unit}".strip()


def _clock(moment: int, now: int) -> str:
    text = times.format_time(moment)
    day, clock = text[:10], text[11:19]
    return f"{clock} UTC" if moment // times.DAY == now // times.DAY else f"{day} {clock} UTC"
