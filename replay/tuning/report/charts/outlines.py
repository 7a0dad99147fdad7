"""A stream's outline as a line and a band, open where its readings paused.

Knows the outline. Must not know what it is compared with.
"""

from __future__ import annotations

from itertools import pairwise

import plotly.graph_objects as go

from replay.tuning.report.charts import look
from replay.tuning.result import Outline


def _stretches(outline: Outline) -> list[slice]:
    """The outline's places without the pauses between them."""
    times = outline.times
    steps = [b - a for a, b in pairwise(times)]
    usual = sorted(steps)[len(steps) // 2] if steps else 0
    breaks = [place + 1 for place, step in enumerate(steps) if step > 2.5 * usual]
    return [slice(a, b) for a, b in zip([0, *breaks], [*breaks, len(times)], strict=True)]


def line(outline: Outline) -> tuple[list[str | None], list[float | None]]:
    """Times and means, with a gap in the line where readings paused."""
    at: list[str | None] = []
    mean: list[float | None] = []
    for stretch in _stretches(outline):
        at += [*(look.instant(time) for time in outline.times[stretch]), None]
        mean += [*look.rounded(outline.mean[stretch]), None]
    return at, mean


def band(outline: Outline) -> go.Scatter:
    """A closed shape for each stretch: along the high edge, back along the low one."""
    at: list[str | None] = []
    edge: list[float | None] = []
    for stretch in _stretches(outline):
        times = [look.instant(time) for time in outline.times[stretch]]
        at += [*times, *reversed(times), None]
        edge += look.rounded(outline.high[stretch])
        edge += [*reversed(look.rounded(outline.low[stretch])), None]
    return go.Scatter(
        x=at,
        y=edge,
        mode="lines",
        line={"width": 0},
        fill="toself",
        fillcolor=look.BAND,
        hoverinfo="skip",
    )
