"""How late? Each drift that was put in, and when each setting caught it.

Knows delays. Must not know false alarms.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.configuration import spans
from replay.tuning.report import chosen, markup, words
from replay.tuning.report.charts import delays, price
from replay.tuning.report.markup import Text
from replay.tuning.result import Delay, Result, Setting, Shape, Shown

_COLUMNS = (
    "Setting",
    "Caught",
    "Half within",
    "Nine in ten within",
    "Floor: best CUSUM for that step, average",
)
_SHOWN = 8
_FLOOR = (
    "The floor is the average delay of the best CUSUM for that very step, with the same interval "
    "between false alarms, in the textbook's world: independent normal readings, and a start from "
    "rest. What was delivered comes from your readings, with their correlation and their steps, "
    "and is told by its half and its nine in ten, not by its average: it may lie on either side. "
    "A setting far above the floor leaves something to gain."
)


def render(result: Result) -> str:
    """The section's parts."""
    few, rest = chosen.few(result), chosen.rest(result)
    found = chosen.drifts(result.settings)
    if not found:
        return markup.paragraph("The recording is too short to tell.")
    parts = [
        markup.paragraph(
            "Drifts were put into the recorded readings of the last part, one at a time, at many "
            "places, rounded to the gauge's step. A delay counts from the drift's beginning, in "
            "pieces of the drifting stream and in running time. Below each figure: the range of "
            "pieces that holds the truth with 90 %."
        )
    ]
    if curves := delays.curves(result):
        drawn = "".join(markup.chart(curve) for curve in curves)
        parts.append(f'<div class="pair">{drawn}</div>')
    parts.append(markup.paragraph(_FLOOR, "small"))
    if (cost := price.chart(result)) is not None:
        parts += [markup.heading("What does ringing less often cost?"), markup.chart(cost)]
    shown = chosen.with_wholes(result, few)
    parts += [_drift(result, shown, rest, shape, amount) for shape, amount in found]
    if result.together is not None and (missing := result.together.unfollowed):
        parts.append(
            markup.paragraph(
                f"{words.begun(result.together.name)}: {', '.join(missing)} could not be followed "
                "here, and could only make it sooner.",
                "small",
            )
        )
    return "".join(parts)


def _drift(
    result: Result,
    few: Sequence[Shown],
    rest: Sequence[Setting],
    shape: Shape,
    amount: float,
) -> str:
    shown, hidden = (_measured(settings, shape, amount) for settings in (few, rest))
    if not shown:  # the best ones were made for another drift
        shown, hidden = hidden[:_SHOWN], hidden[_SHOWN:]
    name = words.drift(shown[0][1], result)
    told = markup.heading(words.begun(name))
    told += markup.table(f"How late {name} was caught", _COLUMNS, _rows(shown))
    if hidden:
        title = f"{words.plural(len(hidden), 'more setting')} at {name}"
        told += markup.fold(title, markup.table(title, _COLUMNS, _rows(hidden)))
    return told


def _measured(settings: Sequence[Shown], shape: Shape, amount: float) -> list[tuple[Shown, Delay]]:
    return [
        (setting, delay)
        for setting in settings
        for delay in setting.delays
        if (delay.shape, delay.amount) == (shape, amount)
    ]


def _rows(measured: Sequence[tuple[Shown, Delay]]) -> list[tuple[Text, ...]]:
    return [
        (
            setting.name,
            f"{delay.caught:,} of {delay.onsets:,}",
            markup.with_note(*words.delay(delay, late=False)),
            markup.with_note(*words.delay(delay, late=True)),
            _floor(delay),
        )
        for setting, delay in measured
    ]


def _floor(delay: Delay) -> Text:
    if delay.floor_readings is None:
        return "none"
    time = "" if delay.floor_seconds is None else spans.long(delay.floor_seconds)
    return markup.with_note(f"{spans.number(delay.floor_readings)} pieces", time)
