"""The streams on one time axis, with their baselines and the alarms of the best settings.

Knows what a reader compares along time. Must not know why an alarm rang.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import plotly.graph_objects as go
from plotly.subplots import make_subplots

from monitor.configuration import spans
from replay.tuning.report import chosen, words
from replay.tuning.report.charts import look, outlines
from replay.tuning.report.markup import Chart
from replay.tuning.result import Alarm, Baseline, Outline, Result, Shown

# With its margins the whole must fit a page of A4, about 1,000 pixels high.
_PANEL, _LINE, _HEAD, _FOOT = 116, 30, 28, 50
_PANELS = 500
_ROWS = 6
_NAME = 40
"""Letters of a setting's name that fit a phone beside its count."""
_INSIDE = 2.3263  # 98 % of a normal distribution lie within so many standard deviations
_DAY = 86_400_000  # plotly's milliseconds
_TICKS = (
    {"dtickrange": [None, _DAY - 1], "value": "%H:%M\n%-d %b %Y"},
    {"dtickrange": [_DAY, None], "value": "%-d %b\n%Y"},
)
_SYMBOLS = {"up": "triangle-up", "down": "triangle-down", None: "diamond"}


def chart(result: Result) -> Chart:
    """Panels of the streams above, a line a setting with its alarms below."""
    places = chosen.streams(result)
    settings = _rows(result)
    grouping = chosen.grouping(result)
    heights = [min(_PANEL, _PANELS / len(places))] * len(places)
    if settings:
        heights.append(float(_LINE * len(settings) + 16))
    found = make_subplots(
        rows=len(heights),
        cols=1,
        shared_xaxes=True,
        row_heights=heights,
        vertical_spacing=min(0.04, 14 / sum(heights)),
    )
    look.dress(found, round(sum(heights)) + 14 * len(heights) + _HEAD + _FOOT, showlegend=False)
    found.update_layout(margin={"l": 56, "r": 16, "t": _HEAD, "b": _FOOT})
    found.update_xaxes(
        look.axis(
            range=[look.instant(t) for t in _ends(result)], type="date", tickformatstops=_TICKS
        )
    )
    found.update_yaxes(look.axis(nticks=5))
    best = chosen.best(result) or (settings[0] if settings else None)
    for row, place in enumerate(places, 1):
        stream = result.streams[place]
        line = grouping.baselines[place] if grouping else None
        alarms = [a for a in best.alarms if a.stream == stream.stream] if best else []
        _panel(found, row, stream.outline, line, alarms, result)
        _label(found, row, look.plain(words.stream_name(stream.stream)))
    if settings:
        _lines(found, len(heights), settings, result)
    found.update_xaxes(title_text="time, UTC", row=len(heights), col=1)
    _parts(found, result)
    return Chart("streams", found.to_json(), _said(result, settings, len(places)), _CAPTION)


def _rows(result: Result) -> list[Shown]:
    """The best settings, and below them what runs today and what would with the fragment."""
    wholes = chosen.with_wholes(result, ())
    return [*chosen.few(result)[: _ROWS - len(wholes)], *wholes]


_CAPTION = (
    "Blue line: mean of the readings in each stretch of time; blue band: where 98 % of them lie. "
    "Brown line: the baseline from the first part; dotted: where 98 % should lie by it. Triangles "
    "point the way of an alarm, a diamond stands where it has none; those in the panels are of the "
    "setting on the first line below. "
    "With a mouse, drag across to look closer and double-click to go back."
)


def _ends(result: Result) -> tuple[int, int]:
    margin = (result.whole.last - result.whole.first) // 100
    return result.whole.first - margin, result.whole.last + margin


def _panel(
    found: go.Figure,
    row: int,
    outline: Outline,
    line: Baseline | None,
    alarms: Sequence[Alarm],
    result: Result,
) -> None:
    found.add_trace(outlines.band(outline), row=row, col=1)
    at, mean = outlines.line(outline)
    told = "%{x|%Y-%m-%d %H:%M}<br>mean %{y:.5g}<extra></extra>"
    drawn = {"mode": "lines", "line": {"color": look.OWN, "width": 1.5}, "hovertemplate": told}
    found.add_trace(go.Scatter(x=at, y=mean, **drawn), row=row, col=1)
    levels = [v for v in (*outline.low, *outline.high) if math.isfinite(v)]
    if line is not None:
        half = _INSIDE * math.hypot(line.sigma, line.sigma_between)
        levels += [line.mean - half, line.mean + half]
        rule = {"color": look.FLOOR, "width": 1.5}
        found.add_hline(line.mean, line=rule, row=row, col=1)
        for level in (line.mean - half, line.mean + half):
            found.add_hline(level, line={**rule, "dash": "dot", "width": 1}, row=row, col=1)
    if levels:
        low_end, high_end = min(levels), max(levels)
        room = 0.22 * ((high_end - low_end) or 1.0)  # for triangles and the name
        found.update_yaxes(range=[low_end - room, high_end + 1.4 * room], row=row, col=1)
        for direction, level in (("up", high_end + room / 2), ("down", low_end - room / 2)):
            chosen_ones = [a for a in alarms if a.direction == direction]
            found.add_trace(_marks(chosen_ones, [level] * len(chosen_ones)), row=row, col=1)


def _lines(found: go.Figure, row: int, settings: Sequence[Shown], result: Result) -> None:
    for place, setting in enumerate(settings):
        level = float(-place)
        rule = {"color": look.GRID, "width": 1}
        found.add_hline(level, line=rule, layer="below", row=row, col=1)
        found.add_trace(_marks(setting.alarms, [level] * len(setting.alarms)), row=row, col=1)
        seen = words.plural(len(setting.alarms), "alarm") if setting.alarms else "no alarm"
        if len(setting.alarms) >= 500:
            seen = "the first 500 alarms"
        found.add_annotation(
            x=0,
            xref="x domain",
            xanchor="left",
            y=level,
            yanchor="bottom",
            yshift=5,
            showarrow=False,
            text=f"{look.plain(words.shortened(setting.name, _NAME))}: {seen}",
            font={"size": 12, "color": look.INK},
            row=row,
            col=1,
        )
    span = [0.4 - len(settings), 0.9]
    found.update_yaxes(range=span, showticklabels=False, ticks="", showgrid=False, row=row, col=1)


def _marks(alarms: Sequence[Alarm], levels: Sequence[float]) -> go.Scatter:
    return go.Scatter(
        x=[look.instant(alarm.time) for alarm in alarms],
        y=levels,
        mode="markers",
        marker={
            "symbol": [_SYMBOLS[alarm.direction] for alarm in alarms],
            "size": 10,
            "color": look.INK,
        },
        hoverinfo="text",
        hovertext=[
            look.plain(
                f"{words.moment(alarm.time)} UTC: {alarm.direction or 'no direction'}, "
                f"{words.stream_name(alarm.stream)}"
            )
            for alarm in alarms
        ],
    )


def _label(found: go.Figure, row: int, text: str) -> None:
    found.add_annotation(
        x=0.005,
        xref="x domain",
        xanchor="left",
        y=1,
        yref="y domain",
        yanchor="top",
        showarrow=False,
        text=f"<b>{text}</b>",
        font={"size": 12, "color": look.INK},
        bgcolor="rgba(255, 255, 255, 0.75)",
        row=row,
        col=1,
    )


def _parts(found: go.Figure, result: Result) -> None:
    """The two parts as shades behind everything, named at the top."""
    for part, name in ((result.fit, "first part: fitted"), (result.proof, "last part: proved")):
        left, right = look.instant(part.first), look.instant(part.last)
        if part is result.fit:
            found.add_shape(
                type="rect",
                xref="x",
                yref="paper",
                x0=left,
                x1=right,
                y0=0,
                y1=1,
                fillcolor="#e6ebef",
                opacity=0.6,
                line_width=0,
                layer="below",
            )
        found.add_annotation(
            x=left,
            xref="x",
            xanchor="left",
            y=1,
            yref="paper",
            yanchor="bottom",
            showarrow=False,
            text=name,
            font={"size": 12},
        )


def _said(result: Result, settings: Sequence[Shown], drawn: int) -> str:
    streams = words.plural(len(result.streams), "stream")
    told = f"{drawn} of {streams} drawn" if drawn < len(result.streams) else streams
    rang = "; ".join(
        f"{s.name}: {words.plural(s.observed.alarms, 'false alarm')}" for s in settings
    )
    return (
        f"{told} from {words.moment(result.whole.first)} to {words.moment(result.whole.last)} UTC, "
        f"with baselines. False alarms in {spans.long(result.proof.running)} of the last part: "
        f"{rang or 'no setting was tried'}."
    )
