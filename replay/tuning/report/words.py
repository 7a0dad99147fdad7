"""Figures of a result in the digits and words that people use.

Knows rounding and units. Must not know HTML.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from datetime import timedelta

from monitor import times
from monitor.configuration import spans
from replay.tuning.result import (
    Delay,
    Grouping,
    Observed,
    Quantile,
    Range,
    Refusal,
    Result,
    Setting,
    Shown,
    Together,
)

_KINDS = {"cusum": "CUSUM", "ewma": "EWMA", "shewhart": "Shewhart chart"}
_CHARTS = {
    "mean": "of means",
    "individual": "of single readings",
    "variance": "of the variance",
    "sd": "of standard deviations",
    "range": "of ranges",
    "median": "of medians",
    "moving_range": "of moving ranges",
}
_ORIGINS = {
    "calibrated": "limit worked out on the first part",
    "given": "constants as given",
    "configured": "as configured now",
}


def moment(instant: int) -> str:
    """A moment to the minute, UTC: ``2026-03-02 06:41``."""
    return f"{times.EPOCH + timedelta(microseconds=instant):%Y-%m-%d %H:%M}"


def plural(number: int, noun: str) -> str:
    """``1 stream``, ``6,000 streams``."""
    return f"{number:,} {noun}{'' if number == 1 else 's'}"


def decimals(spread: float) -> int:
    """Digits after the point that a level is worth, where readings spread by ``spread``."""
    return max(0, 2 - math.floor(math.log10(spread))) if spread > 0 else 3


def level(value: float, spread: float) -> str:
    """A level in the gauge's unit, to about a hundredth of its spread."""
    return f"{value:.{min(decimals(spread), 9)}f}"


def amount(value: float, unit: str) -> str:
    """``1.5 g``, or the bare number of a gauge without a unit."""
    return f"{value:.4g}\u00a0{unit}".rstrip()


def between(low: str, high: str) -> str:
    """``9.1 to 48 days``: the unit once where both ends share it."""
    number, _, unit = low.partition(" ")
    if low == high:
        return low
    return f"{number} to {high}" if high.partition(" ")[2] == unit else f"{low} to {high}"


def time_range(found: Range) -> str:
    """A range of seconds, long ones in days and years."""
    if found.high is None:
        return f"at least {spans.long(found.low)}"
    return between(spans.long(found.low), spans.long(found.high))


def counted(observed: Observed) -> tuple[str, str]:
    """How often a setting rang with nothing wrong, by counting; and how sure that is."""
    if not observed.seconds:
        return "not given", "an alert was open all the time"
    if observed.interval is None:
        return "not given", "its centre does not stay"
    if not observed.alarms:
        return f"at least {spans.long(observed.interval.low)}", "none seen; 95 %"
    return spans.long(observed.seconds / observed.alarms), time_range(observed.interval)


def by_tail(shown: Shown) -> tuple[str, str]:
    """How often it will ring with nothing wrong, by its tail, and how sure that is; or why not."""
    found = shown.extrapolated
    if found is None:
        return "not given", shown.no_interval
    if found.interval.high is None:
        return f"at least {spans.long(found.interval.low)}", "more than it can tell; 90 %"
    told = time_range(found.interval)
    if isinstance(shown, Together):
        return spans.long(found.seconds), f"{told}; rates added up"
    if found.counted:
        return spans.long(found.seconds), f"{told}; from the count, which is many"
    return spans.long(found.seconds), f"{told}; factor {found.factor:.2g}"


def pieces(found: Quantile, horizon: int) -> str:
    """A delay in pieces."""
    if found.value is None:
        return f"not within {horizon:,} pieces"
    return f"{spans.number(found.value)} pieces"


def delay(found: Delay, late: bool) -> tuple[str, str]:
    """How late half of the drifts, or nine in ten, were caught; and how sure that is."""
    readings = found.late_readings if late else found.median_readings
    seconds = found.late_seconds if late else found.median_seconds
    told = pieces(readings, found.horizon)
    if seconds.value is not None:
        told += f", {spans.long(seconds.value)}"
    return told, _range(readings.interval, spans.number)


def _range(found: Range | None, told: Callable[[float], str]) -> str:
    if found is None:
        return ""
    if found.high is None:
        return f"{told(found.low)} or more"
    return between(told(found.low), told(found.high))


def joined(pair: tuple[str, str]) -> str:
    """A figure with its range in brackets, for a sentence."""
    return f"{pair[0]} ({pair[1]})" if pair[1] else pair[0]


def refusal(found: Refusal) -> str:
    """A refusal as two sentences."""
    what, why, instead = (part.rstrip(".") for part in (found.what, found.why, found.instead))
    return f"{what}: {why}. Instead: {instead}."


def begun(text: str) -> str:
    """``text`` with a capital letter."""
    return text[:1].upper() + text[1:]


def drift(delay: Delay, result: Result) -> str:
    """What was put into the readings: ``a step of 1.5 g``."""
    if delay.shape == "spread":
        return f"a spread {delay.amount:.3g} times as wide"
    size = amount(delay.amount, result.unit)
    if delay.shape == "ramp":
        return f"a ramp to {size} over {result.ramp:,} readings of a stream"
    return f"a step of {size}"


def detector(setting: Setting) -> str:
    """``CUSUM of means``."""
    return f"{_KINDS[setting.kind]} {_CHARTS.get(setting.chart, setting.chart)}"


def constants(setting: Setting) -> str:
    """``k 0.53, h 8.14``."""
    return ", ".join(f"{key} {value:.4g}" for key, value in setting.constants)


def purpose(setting: Setting, grouping: Grouping, unit: str) -> str:
    """What a setting is, in a line: readings gathered how, made for what, from where."""
    parts = [f"{detector(setting)}, {constants(setting)}", grouping.said]
    if setting.catch is not None:
        factor = setting.chart in ("variance", "sd", "range")
        aim = f"× {setting.catch:.3g} spread" if factor else amount(setting.catch, unit)
        made = f"made to catch {aim}"
        if setting.ignore:
            made += f" and ignore {amount(setting.ignore, unit)}"
        parts.append(made)
    parts.append(_ORIGINS[setting.origin])
    return "; ".join(parts)


def whole(found: Together, result: Result) -> str:
    """What is counted in the row of all detectors of a configuration, in a line."""
    told = "what runs today" if found is result.together else "what would run with the fragment"
    told += f": {', '.join(found.detectors)}; as the crew hears alerts"
    if found.signals:
        told += f", {plural(found.signals, 'signal')} in all"
    if found.standing >= 0.001:
        told += f"; one stood open for {spans.number(100 * found.standing)} % of the time"
    return told


def shortened(text: str, length: int = 46) -> str:
    """``text`` where it fits a chart, else its beginning."""
    return text if len(text) <= length else text[: length - 1].rstrip() + "…"


def stream_name(stream: str) -> str:
    """``head 4, lane 1`` of ``head=4;lane=1``; a stream without keys is the whole."""
    return stream.replace("=", " ").replace(";", ", ") or "the stream"
