"""Whether subgroup means keep to a centre: the spread of longer and longer means.

Knows the ratios. Must not know what follows from them.
"""

from __future__ import annotations

import plotly.graph_objects as go

from replay.tuning.report import words
from replay.tuning.report.charts import look
from replay.tuning.report.markup import Chart
from replay.tuning.result import Grouping, Result


def chart(result: Result) -> Chart | None:
    """A curve for each way of gathering readings; None where the recording is too short for any."""
    drawn = [g for g in result.groupings if g.wander.lengths][: len(look.SERIES)]
    if not drawn:
        return None
    lengths = [m for grouping in drawn for m in grouping.wander.lengths]
    ratios = [1.0, *(r for grouping in drawn for r in grouping.wander.ratios if r > 0)]
    found = look.figure(
        360,
        margin={"l": 64, "r": 16, "t": 20 + 20 * (len(drawn) + 1), "b": 48},
        xaxis=look.axis("subgroups in a mean", **look.lengths(min(lengths), max(lengths))),
        yaxis=look.axis("spread, 1 = independent", **look.lengths(min(ratios), max(ratios))),
    )
    found.update_layout(legend={"orientation": "v"})
    found.add_hline(1.0, line={"color": look.FLOOR, "width": 2, "dash": "dash"})
    for at in (50, 200):
        found.add_vline(at, line={"color": look.AXIS, "width": 1, "dash": "dot"})
    for grouping, (color, dash, symbol) in zip(drawn, look.SERIES, strict=False):
        found.add_trace(
            go.Scatter(
                x=grouping.wander.lengths,
                y=look.rounded(grouping.wander.ratios),
                mode="lines+markers",
                line={"color": color, "width": 2, "dash": dash},
                marker={"symbol": symbol, "size": 6, "color": color},
                name=look.plain(words.shortened(grouping.said)),
                hovertemplate="means of %{x}: %{y:.3g}<extra></extra>",
            )
        )
    said = "; ".join(f"{grouping.said}: {sentence(grouping)}" for grouping in drawn)
    return Chart("wander", found.to_json(), f"{said}.", _CAPTION)


_CAPTION = (
    "A process wanders where its mean itself moves on and on, so that one part of a recording does "
    "not foretell the next. Drawn is how much more means of many subgroups spread than independent "
    "ones would (dashed: 1). A curve that levels out belongs to a process that comes back to its "
    "centre; one that climbs from 50 to 200 (dotted) to one that wanders, whose false alarms "
    "nobody can promise."
)


def sentence(grouping: Grouping) -> str:
    """What the ratios say, in figures."""
    wander = grouping.wander
    if wander.moved:
        return "a stream moved and stayed away"
    if wander.growth is None:
        return "too short to tell whether it wanders"
    word = "wanders" if wander.wanders else "keeps to its centre"
    return (
        f"{word}: from 50 to 200 subgroups by a factor of {wander.growth:.2f} "
        f"(limit {wander.limit:.2g})"
    )
