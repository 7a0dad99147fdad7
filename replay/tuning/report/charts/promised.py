"""Promise against delivered: for each setting the interval between false alarms, found two ways.

Knows the two intervals. Must not know how they were worked out.
"""

from __future__ import annotations

from collections.abc import Sequence

import plotly.graph_objects as go

from monitor.configuration import spans
from replay.tuning.report import words
from replay.tuning.report.charts import look
from replay.tuning.report.markup import Chart
from replay.tuning.result import Result, Shown

_ROW, _HEAD, _FOOT = 54, 66, 52


def chart(result: Result, settings: Sequence[Shown]) -> Chart:
    """A row a setting: counted and by the tail, with what is asked of it as a mark across."""
    low, high = _span(result, settings)
    found = look.figure(
        _ROW * len(settings) + _HEAD + _FOOT,
        margin={"l": 8, "r": 24, "t": _HEAD, "b": _FOOT},
        xaxis=look.axis("one false alarm in …", **look.durations(low, high)),
        yaxis=look.axis(
            range=[0.45 - len(settings), 0.7],
            showticklabels=False,
            ticks="",
            showgrid=False,
            showline=False,
        ),
    )
    if all(each.asked == result.promise for each in settings):
        look.upright(found, result.promise, f"asked: {spans.long(result.promise)}")
    else:
        _asked(found, settings)
    for place, setting in enumerate(settings):
        top = float(-place)
        named = words.shortened(setting.name)
        if setting.extrapolated is None and setting.observed.interval is None:
            named = f"{words.shortened(setting.name, 30)}: no interval given"
        found.add_annotation(
            x=0,
            xref="x domain",
            xanchor="left",
            y=top,
            yanchor="bottom",
            yshift=2,
            showarrow=False,
            text=look.plain(named),
            font={"size": 12, "color": look.INK},
            bgcolor="rgba(255, 255, 255, 0.8)",
        )
        _intervals(found, setting, top, high, legend=place == 0)
    return Chart("promised", found.to_json(), _said(result, settings), _CAPTION)


def _asked(found: go.Figure, settings: Sequence[Shown]) -> None:
    """A stroke across each row, since each is asked for its own part of the promise."""
    levels: list[float | None] = []
    for place in range(len(settings)):
        levels += [-place - 0.02, -place - 0.5, None]
    found.add_trace(
        go.Scatter(
            x=[seconds for each in settings for seconds in (each.asked, each.asked, None)],
            y=levels,
            mode="lines",
            line={"color": look.FLOOR, "width": 3},
            name="asked of it",
            hoverinfo="text",
            hovertext=[
                text
                for each in settings
                for text in (*[f"asked: one in {spans.long(each.asked)}"] * 2, "")
            ],
            cliponaxis=False,
        )
    )


_CAPTION = (
    "Each row is a setting. Square: what the counted false alarms support; circle: the tail of its "
    "statistic, extrapolated. The lines hold the truth with 90 %; an arrow has no upper end (none "
    "was seen, or more than the recording can tell). A setting keeps the promise where the lower "
    "end of its interval is no shorter than what was asked of it: where several share the promise, "
    "its part (the brown stroke)."
)


def _span(result: Result, settings: Sequence[Shown]) -> tuple[float, float]:
    ends = [result.promise, *(each.asked for each in settings)]
    for setting in settings:
        for found in (
            setting.observed.interval,
            setting.extrapolated.interval if setting.extrapolated else None,
        ):
            if found is not None:
                ends += [found.low, found.high if found.high is not None else found.low * 3]
    return max(min(ends) / 2, 0.5), min(max(ends) * 2, 3e12)


def _intervals(found: go.Figure, setting: Shown, top: float, high: float, legend: bool) -> None:
    seen, tail = setting.observed, setting.extrapolated
    if seen.interval is not None:
        centre = seen.seconds / seen.alarms if seen.alarms else None
        end = seen.interval.high
        told = f"counted: {words.joined(words.counted(seen))}"
        ends = (seen.interval.low, centre, high if end is None else end)
        _bar(found, ends, top - 0.16, (look.INK, "dot", "square"), told, end is None)
    if tail is not None:
        end = tail.interval.high
        centre = None if end is None else tail.seconds
        told = f"by the tail: {words.joined(words.by_tail(setting))}"
        ends = (tail.interval.low, centre, high if end is None else end)
        _bar(found, ends, top - 0.36, (look.OWN, "solid", "circle"), told, end is None)
    if legend:
        for name, color, symbol in (
            ("counted in the last part", look.INK, "square"),
            ("by the tail", look.OWN, "circle"),
        ):
            mark = {"symbol": symbol, "size": 9, "color": color}
            found.add_trace(go.Scatter(x=[None], y=[None], mode="markers", marker=mark, name=name))


def _bar(
    found: go.Figure,
    ends: tuple[float, float | None, float],
    level: float,
    look_of: tuple[str, str, str],
    told: str,
    open_ended: bool,
) -> None:
    color, dash, symbol = look_of
    low, centre, high = ends
    symbols = ["line-ns", symbol, "triangle-right" if open_ended else "line-ns"]
    found.add_trace(
        go.Scatter(
            x=[low, low if centre is None else centre, high],
            y=[level] * 3,
            mode="lines+markers",
            line={"color": color, "width": 2, "dash": dash},
            marker={
                "symbol": symbols,
                "size": [9, 9 if centre is not None else 0, 10],
                "color": color,
                "line": {"color": color, "width": 2},
            },
            hoverinfo="text",
            hovertext=[told] * 3,
            showlegend=False,
            cliponaxis=False,
        )
    )


def _said(result: Result, settings: Sequence[Shown]) -> str:
    told = []
    for setting in settings:
        seen, tail = words.counted(setting.observed), words.by_tail(setting)
        told.append(
            f"{setting.name}: counted {words.joined(seen)}, by the tail {words.joined(tail)}"
        )
    return f"Asked: one false alarm in {spans.long(result.promise)}. " + "; ".join(told) + "."
