"""The tables of a result on a terminal: which rows, and their figures in people's digits.

Knows what is worth a column. Must not know how wide a terminal is, or how a figure was worked out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from monitor.configuration import spans
from replay.tuning.layout import Row, Table
from replay.tuning.ranking import at_catch, at_spread, keeps
from replay.tuning.result import Delay, Quantile, Range, Result, Setting, Shown

NOW, NEW = "now", "new"
"""What stands before the rows of all configured detectors together, and of all of the fragment."""

_ROWS = 12
_SPREAD = 4


def shown(result: Result) -> list[Setting]:
    """The best of the mean and of the spread, and every one that somebody wrote down."""
    mean = [each for each in result.settings if not each.of_spread]
    spread = [each for each in result.settings if each.of_spread]
    kept = mean[:_ROWS] + spread[:_SPREAD]
    kept += [s for s in mean[_ROWS:] + spread[_SPREAD:] if s.origin == "configured"]
    return kept


def _groups(
    result: Result,
    shown: Sequence[Setting],
    more: bool,
    figures: Callable[[Shown], tuple[str, ...]],
) -> tuple[tuple[str, tuple[Row, ...]], ...]:
    """What runs today, what would with the fragment, then settings for the mean, then those for the
    spread."""

    def rows(settings: Sequence[Setting]) -> tuple[Row, ...]:
        return tuple(
            Row(
                "" if each.rank is None else f"{each.rank}.",
                each.name,
                ", ".join(f"{key} {value:g}" for key, value in each.constants) if more else "",
                figures(each),
            )
            for each in settings
        )

    spread = [each for each in shown if each.of_spread]
    told: list[tuple[str, tuple[Row, ...]]] = []
    for mark, whole in ((NOW, result.together), (NEW, result.proposed)):
        if whole is not None and any(figures(whole)):
            told.append(("", (Row(mark, whole.name, "", figures(whole)),)))
    told.append(("", rows([each for each in shown if not each.of_spread])))
    if spread:
        title = f"for the spread, ranked by one {result.ratio:g} times as large:"
        told.append((title, rows(spread)))
    return tuple(told)


def alarms(result: Result, settings: Sequence[Setting]) -> Table:
    """False alarms seen, the interval they support, what was asked, and whether that is kept."""

    parts = any(each.asked != result.promise for each in settings)

    def figures(each: Shown) -> tuple[str, ...]:
        asked = (spans.long(each.asked),) if parts else ()
        return (f"{each.observed.alarms:,}", _interval(each), *asked, keeps(each))

    titles = ("seen", "one in", *(("asked",) if parts else ()), "keeps it")
    return Table("setting", "constants", titles, _groups(result, settings, True, figures))


def delays(result: Result, settings: Sequence[Setting]) -> Table:
    """How late a step was caught, and a ramp and a spread nine times in ten."""

    def figures(each: Shown) -> tuple[str, ...]:
        step = at_catch(each, result.catch[0])
        ramp = next((d for d in each.delays if d.shape == "ramp"), None)
        spread = at_spread(each)
        floor = None if step is None else step.floor_readings
        return (
            "" if step is None else _pieces(step.median_readings, step),
            "" if step is None else _with_range(step.late_readings, step),
            "" if step is None else _time(step.late_seconds),
            "" if floor is None else f"{floor:.0f}",
            "" if ramp is None else _pieces(ramp.late_readings, ramp),
            "" if spread is None else _pieces(spread.late_readings, spread),
        )

    titles = ("half", "nine in ten", "in time", "floor", "ramp", "spread")
    return Table("setting", "", titles, _groups(result, settings, False, figures))


def _pieces(found: Quantile, delay: Delay) -> str:
    return f"over {delay.horizon:,}" if found.value is None else f"{found.value:,.0f}"


def _with_range(found: Quantile, delay: Delay) -> str:
    if found.interval is None:
        return _pieces(found, delay)
    high = "…" if found.interval.high is None else f"{found.interval.high:,.0f}"
    return f"{found.value:,.0f} ({found.interval.low:,.0f} - {high})"


def _time(found: Quantile) -> str:
    return "" if found.value is None else spans.long(found.value)


def events(result: Result, settings: Sequence[Setting]) -> Table:
    """What became of labelled events."""

    def figures(each: Shown) -> tuple[str, ...]:
        score = each.events
        if score is None:
            return ("", "", "")
        half = "" if score.median_seconds is None else spans.long(score.median_seconds)
        return (
            f"{score.caught} of {score.causes}",
            half,
            f"{score.avoided} of {score.false_verdicts}",
        )

    titles = ("causes caught", "half", "avoided false")
    return Table("setting", "", titles, _groups(result, settings, False, figures))


def _interval(found: Shown) -> str:
    told = found.extrapolated
    if told is not None:
        return _range(told.interval) + (" (counted)" if told.counted else "")
    if found.observed.interval is not None:
        return f"{_range(found.observed.interval)} (counted)"
    return "not told"


def _range(found: Range) -> str:
    if found.high is None:
        return f"at least {spans.long(found.low)}"
    low, high = spans.long(found.low), spans.long(found.high)
    if low.split()[-1] == high.split()[-1] and " " in low:
        low = low.rsplit(" ", 1)[0]
    return f"{low} - {high}"
