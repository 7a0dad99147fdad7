"""How late against how large: the delay curves with their floor.

Knows delays. Must not know how they were measured.
"""

from __future__ import annotations

from collections.abc import Sequence

import plotly.graph_objects as go

from replay.tuning.report import words
from replay.tuning.report.charts import look
from replay.tuning.report.markup import Chart
from replay.tuning.result import Delay, Quantile, Result, Shown

_CURVES = len(look.SERIES) - 1


def with_curves(result: Result) -> list[Shown]:
    """What curves are drawn of: the best settings for the mean, and what runs today."""
    drawn: list[Shown] = [s for s in result.settings if s.curve and not s.of_spread]
    now = result.together
    if now is None or not now.curve:
        return drawn[:_CURVES]
    return [*drawn[: _CURVES - 1], now]


def curves(result: Result) -> list[Chart]:
    """Median and 90 % point against the size of a step, on equal scales; none without curves."""
    settings = with_curves(result)
    if not settings:
        return []
    low, high = _scale(settings)
    return [
        _curve(result, settings, late=False, scale=(low, high)),
        _curve(result, settings, late=True, scale=(low, high)),
    ]


def _scale(settings: Sequence[Shown]) -> tuple[float, float]:
    lengths = [length for setting in settings for d in setting.curve for length in _lengths(d)]
    return min(lengths, default=1.0), max(lengths, default=10.0)


def _lengths(delay: Delay) -> list[float]:
    """Every height at which something is drawn for a delay."""
    median, late = delay.median_readings.value, delay.late_readings.value
    waited = float(delay.horizon) if median is None or late is None else None
    return [length for length in (median, late, delay.floor_readings, waited) if length]


def _curve(
    result: Result, settings: Sequence[Shown], late: bool, scale: tuple[float, float]
) -> Chart:
    unit = f", {result.unit}" if result.unit else ""
    title = "nine in ten caught within" if late else "half of them caught within"
    found = look.figure(
        400,
        margin={"l": 64, "r": 16, "t": 30 + 20 * (len(settings) + 2), "b": 48},
        xaxis=look.axis(f"size of the step{look.plain(unit)}", rangemode="tozero"),
        yaxis=look.axis("pieces of the stream", **look.lengths(*scale)),
    )
    found.update_layout(legend={"orientation": "v", "title": {"text": f"<b>{title}</b>"}})
    first = settings[0]
    floor = [(d.amount, d.floor_readings) for d in first.curve if d.floor_readings is not None]
    if floor:
        found.add_trace(
            go.Scatter(
                x=[x for x, _ in floor],
                y=[y for _, y in floor],
                mode="lines",
                line={"color": look.FLOOR, "width": 2, "dash": "dash"},
                name="best CUSUM for that step (an average)",
                hovertemplate="floor at %{x:.4g}: %{y:.4g} pieces<extra></extra>",
            )
        )
    for setting, (color, dash, symbol) in zip(settings, look.SERIES, strict=False):
        points = [
            (d.amount, d.late_readings if late else d.median_readings, d.horizon)
            for d in setting.curve
        ]
        found.add_trace(_line(setting, points, color, dash, symbol, bars=setting is first))
        lost = [(x, horizon) for x, quantile, horizon in points if quantile.value is None]
        if lost:
            mark = {"symbol": "arrow-up-open", "size": 12, "color": color}
            text = [f"not within {horizon:,} pieces" for _, horizon in lost]
            found.add_trace(
                go.Scatter(
                    x=[x for x, _ in lost],
                    y=[y for _, y in lost],
                    mode="markers",
                    marker=mark,
                    hoverinfo="text",
                    hovertext=text,
                    showlegend=False,
                )
            )
    said = _said(result, settings, late)
    which = "Nine in ten steps" if late else "Half of the steps"
    caption = (
        f"{which} of a size were caught within so many pieces of the stream after they began. An "
        "open arrow: not within the pieces that were waited for. Bars: 90 % uncertainty. The floor "
        "is that of the first setting's subgroups."
    )
    return Chart("late-curve" if late else "median-curve", found.to_json(), said, caption)


def _line(
    setting: Shown,
    points: Sequence[tuple[float, Quantile, int]],
    color: str,
    dash: str,
    symbol: str,
    bars: bool,
) -> go.Scatter:
    error = None
    if bars:
        error = {
            "type": "data",
            "symmetric": False,
            "array": [_reach(q, up=True) for _, q, _ in points],
            "arrayminus": [_reach(q, up=False) for _, q, _ in points],
            "thickness": 1,
            "width": 3,
        }
    return go.Scatter(
        x=[x for x, _, _ in points],
        y=[q.value for _, q, _ in points],
        error_y=error,
        mode="lines+markers",
        line={"color": color, "width": 2, "dash": dash},
        marker={"symbol": symbol, "size": 7, "color": color},
        name=look.plain(words.shortened(setting.name, 40)),
        hovertemplate="step %{x:.4g}: %{y:.4g} pieces<extra></extra>",
    )


def _reach(found: Quantile, up: bool) -> float:
    if found.value is None or found.interval is None:
        return 0.0
    end = found.interval.high if up else found.interval.low
    return abs(end - found.value) if end is not None else 0.0


def _said(result: Result, settings: Sequence[Shown], late: bool) -> str:
    told = []
    for setting in settings:
        steps = ", ".join(
            f"{words.amount(d.amount, result.unit)} "
            f"{words.pieces(d.late_readings if late else d.median_readings, d.horizon)}"
            for d in setting.curve
        )
        told.append(f"{setting.name}: {steps}")
    share = "nine in ten" if late else "half"
    return f"How late {share} of the steps were caught, by size of the step. " + "; ".join(told)
