"""What all charts share: colours with a second sign each, axes, ticks in people's durations.

Knows plotly. Must not know what is drawn.
"""

from __future__ import annotations

import math
from datetime import timedelta
from html import escape
from typing import Any

import plotly.graph_objects as go

from monitor import times

INK, MUTED, GRID, AXIS = "#1c2733", "#44525f", "#dfe5ea", "#8794a0"
OWN, FLOOR = "#0b5c8a", "#a8541a"
BAND = "rgba(11, 92, 138, 0.16)"

# Colours that people with any colour vision tell apart, darker and lighter for grey printers;
# dash and marker say the same again.
SERIES = (
    ("#0b5c8a", "solid", "circle"),
    ("#1c2733", "dot", "square"),
    ("#7a5aa6", "dashdot", "diamond"),
    ("#5f7d1f", "longdash", "triangle-up"),
    ("#8794a0", "solid", "x"),
)

_MINUTE, _HOUR, _DAY, _YEAR = 60.0, 3_600.0, 86_400.0, 365.25 * 86_400.0
_TICKS = (
    (1.0, "1 s"),
    (10.0, "10 s"),
    (_MINUTE, "1 min"),
    (10 * _MINUTE, "10 min"),
    (_HOUR, "1 h"),
    (8 * _HOUR, "8 h"),
    (3 * _DAY, "3 days"),
    (14 * _DAY, "14 days"),
    (100 * _DAY, "100 days"),
    (2 * _YEAR, "2 years"),
    (10 * _YEAR, "10 years"),
    (100 * _YEAR, "100 years"),
    (1000 * _YEAR, "1,000 years"),
)
_MOST_TICKS = 6


def figure(height: int, **layout: Any) -> go.Figure:
    """An empty chart in the house style, as wide as its place."""
    found = go.Figure()
    dress(found, height, **layout)
    return found


def dress(found: go.Figure, height: int, **layout: Any) -> None:
    """Put the house style on a chart."""
    settled: dict[str, Any] = {
        "template": go.layout.Template(),
        "height": height,
        "autosize": True,
        "font": {"family": "system-ui, sans-serif", "size": 13, "color": MUTED},
        "paper_bgcolor": "#fff",
        "plot_bgcolor": "#fff",
        "margin": {"l": 64, "r": 24, "t": 24, "b": 48},
        "legend": {
            "orientation": "h",
            "x": 0,
            "y": 1,
            "yanchor": "top",
            "yref": "container",
            "itemclick": False,
            "itemdoubleclick": False,
        },
        "hovermode": "closest",
        "showlegend": True,
    }
    found.update_layout({**settled, **layout})


def axis(title: str = "", **extra: Any) -> dict[str, Any]:
    """An axis with light grid lines."""
    return {
        "title": {"text": title, "font": {"size": 13}, "standoff": 8},
        "gridcolor": GRID,
        "linecolor": AXIS,
        "showline": True,
        "zeroline": False,
        "ticks": "outside",
        "tickcolor": AXIS,
        "automargin": True,
        **extra,
    }


def durations(low: float, high: float) -> dict[str, Any]:
    """A logarithmic axis over seconds from ``low`` to ``high``, with ticks people can read."""
    inside = [tick for tick in _TICKS if low <= tick[0] <= high]
    step = max(1, math.ceil(len(inside) / _MOST_TICKS))
    told = inside[::step]
    return {
        "type": "log",
        "range": [math.log10(low), math.log10(high)],
        "tickvals": [seconds for seconds, _ in told],
        "ticktext": [name for _, name in told],
    }


def lengths(low: float, high: float) -> dict[str, Any]:
    """An axis over positive numbers from ``low`` to ``high``: logarithmic where they go far."""
    if high < 6 * low:
        return {"range": [max(0.0, low - (high - low) / 2), high + (high - low) / 5 or 1.0]}
    powers = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    marks = (1, 2, 5) if len(powers) < 5 else (1,)
    ticks = [mark * 10.0**power for power in powers for mark in marks]
    return {
        "type": "log",
        "range": [math.log10(low) - 0.1, math.log10(high) + 0.1],
        "tickvals": ticks,
        "ticktext": [f"{tick:,.4g}" if tick < 1e4 else f"{tick:,.0f}" for tick in ticks],
    }


def upright(found: go.Figure, seconds: float, said: str) -> None:
    """A dashed line across a logarithmic axis, named at its head."""
    found.add_vline(seconds, line={"color": FLOOR, "width": 2, "dash": "dash"})
    found.add_annotation(
        x=math.log10(seconds),  # where plotly puts texts on such an axis
        xref="x",
        y=1,
        yref="paper",
        yanchor="bottom",
        showarrow=False,
        text=said,
        font={"size": 12, "color": FLOOR},
    )


def instant(microseconds: int) -> str:
    """A moment as plotly reads it; without an offset it is shown as it stands, in UTC."""
    moment = times.EPOCH + timedelta(microseconds=microseconds)
    return moment.replace(tzinfo=None).isoformat(sep=" ", timespec="milliseconds")


def plain(text: str) -> str:
    """A name from outside, kept from being read as the markup that plotly knows."""
    return escape(text, quote=False)


def rounded(values: tuple[float, ...]) -> list[float]:
    """Six digits draw as well as sixteen, in a third of the file."""
    return [float(f"{value:.6g}") for value in values]
