"""The tail of a setting's statistic, the line fitted to it, and the limit.

Knows the fitted line's formula, as the result states it. Must not know how it was fitted.
"""

from __future__ import annotations

import math

import plotly.graph_objects as go

from monitor.configuration import spans
from replay.tuning.report import words
from replay.tuning.report.charts import look
from replay.tuning.report.markup import Chart
from replay.tuning.result import Grouping, Setting, Tail
from replay.tuning.tails import scale_of

_POINTS = 60


def chart(place: int, setting: Setting, grouping: Grouping) -> Chart | None:
    """How often each level was reached, with the fitted line carried on to the limit."""
    tail = setting.tail
    if tail is None or not tail.levels:
        return None
    wanted = 1 / (setting.asked * grouping.rate)
    end = max(tail.limit, tail.levels[-1]) * 1.08
    line = [tail.threshold + (end - tail.threshold) * i / _POINTS for i in range(_POINTS + 1)]
    fitted = [rate_at(tail, level) for level in line]
    visible = [rate for rate in (*tail.rates, *fitted, wanted) if rate > 0]
    found = look.figure(
        340,
        margin={"l": 72, "r": 16, "t": 92, "b": 48},
        xaxis=look.axis("level of the statistic"),
        yaxis=look.axis(
            "share of subgroups that reach it",
            type="log",
            exponentformat="power",
            dtick=max(1, round(math.log10(max(visible) / min(visible)) / 6)),
            range=[math.log10(min(visible)) - 0.3, math.log10(max(visible)) + 0.3],
        ),
    )
    title = f"<b>{look.plain(words.shortened(setting.name, 44))}</b>"
    found.update_layout(legend={"orientation": "v", "title": {"text": title}})
    found.add_trace(
        go.Scatter(
            x=look.rounded(tail.levels),
            y=look.rounded(tail.rates),
            mode="markers",
            marker={"color": look.OWN, "size": 5},
            name="reached in the last part",
            hovertemplate="level %{x:.4g}: %{y:.3g} of subgroups<extra></extra>",
        )
    )
    found.add_trace(
        go.Scatter(
            x=look.rounded(tuple(line)),
            y=look.rounded(tuple(fitted)),
            mode="lines",
            line={"color": look.INK, "width": 1.5},
            name="fitted, carried on",
            hovertemplate="level %{x:.4g}: %{y:.3g} by the line<extra></extra>",
        )
    )
    found.add_vline(tail.limit, line={"color": look.INK, "width": 1.5, "dash": "dot"})
    found.add_hline(wanted, line={"color": look.FLOOR, "width": 2, "dash": "dash"})
    said = (
        f"{setting.name}: by the fitted line one subgroup in {_once(rate_at(tail, tail.limit))} "
        f"reaches the limit {tail.limit:.4g}; the promise allows one in {_once(wanted)}."
    )
    if setting.extrapolated is None:
        said += f" No interval was made of it: {setting.no_interval.rstrip('.')}."
    return Chart(f"tail-{place}", found.to_json(), said, said)


def rate_at(tail: Tail, level: float) -> float:
    """The fitted line: exp(−(g(level) − g(threshold)) / scale) · rate."""
    threshold = scale_of(tail.threshold, tail.weight, tail.unit)
    beyond = scale_of(level, tail.weight, tail.unit) - threshold
    return math.exp(-beyond / tail.scale) * tail.rate


def _once(rate: float) -> str:
    return spans.number(1 / rate) if rate > 0 else "none"
