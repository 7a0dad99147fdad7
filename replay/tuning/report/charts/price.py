"""How seldom against how late: what ringing less often costs.

Knows every setting's two figures. Must not know how they were measured.
"""

from __future__ import annotations

from collections.abc import Sequence

import plotly.graph_objects as go

from monitor.configuration import spans
from replay.tuning.report import chosen, words
from replay.tuning.report.charts import look
from replay.tuning.report.markup import Chart
from replay.tuning.result import Result, Setting, Shown

_LINES = 3


def chart(result: Result) -> Chart | None:
    """Every setting as a point: how seldom it rings against how late it is."""
    points: list[tuple[Shown, float, float]] = []
    mean = [each for each in result.settings if not each.of_spread]
    for setting in chosen.with_wholes(result, mean):
        delay = chosen.first_step(setting, result)
        found = setting.extrapolated
        if found is None or found.interval.high is None:
            continue  # a bound is no place on a scale
        if delay is not None and delay.late_readings.value is not None:
            points.append((setting, found.seconds, delay.late_readings.value))
    if len(points) < 3:
        return None
    late = [pieces for _, _, pieces in points]
    intervals = [seconds for _, seconds, _ in points] + [each.asked for each, _, _ in points]
    drawn = look.figure(
        420,
        margin={"l": 64, "r": 24, "t": 96, "b": 52},
        xaxis=look.axis(
            "one false alarm in … (by the tail)",
            **look.durations(max(min(intervals) / 2, 0.5), min(max(intervals) * 2, 3e12)),
        ),
        yaxis=look.axis(
            "pieces until nine in ten are caught", **look.lengths(min(late), max(late))
        ),
    )
    asked = sorted({each.asked for each, _, _ in points})
    for place, seconds in enumerate(asked[:_LINES]):
        look.upright(drawn, seconds, "asked: " * (place == 0) + spans.long(seconds))
    for meets, name, symbol, color in (
        (True, "keeps the promise", "circle", look.OWN),
        (False, "not shown to keep it", "circle-open", look.MUTED),
    ):
        these = [p for p in points if p[0].meets is meets and isinstance(p[0], Setting)]
        if these:
            drawn.add_trace(_points(these, name, symbol, color))
    best = chosen.best(result)
    these = [point for point in points if point[0] is best]
    if these:
        drawn.add_trace(_points(these, "the one to take", "star-diamond", look.INK, size=15))
    for whole, name, symbol in (
        (result.together, "what runs now, together", "square"),
        (result.proposed, "the fragment, together", "square-open"),
    ):
        these = [point for point in points if point[0] is whole]
        if these:
            drawn.add_trace(_points(these, name, symbol, look.FLOOR, size=12))
    kept = sum(1 for point in points if point[0].meets)
    said = (
        f"{words.plural(len(points), 'setting')}, {kept} of them keep the promise: the seldomer a "
        "setting rings with nothing wrong, the later it catches a drift."
    )
    caption = (
        f"Every setting whose interval this recording can tell, at a step of "
        f"{words.amount(result.catch[0], result.unit)}. Low is early, right is quiet; a setting "
        "keeps the promise only where its whole interval, not only its point, lies right of the "
        "line (the one of its part, where several share the promise)."
    )
    return Chart("price", drawn.to_json(), said, caption)


def _points(
    points: Sequence[tuple[Shown, float, float]],
    name: str,
    symbol: str,
    color: str,
    size: int = 9,
) -> go.Scatter:
    return go.Scatter(
        x=[seconds for _, seconds, _ in points],
        y=[late for _, _, late in points],
        mode="markers",
        marker={"symbol": symbol, "size": size, "color": color, "line": {"width": 1.5}},
        name=name,
        hoverinfo="text",
        hovertext=[
            look.plain(f"{s.name}: once in {spans.long(seconds)}, {spans.number(late)} pieces")
            for s, seconds, late in points
        ],
    )
