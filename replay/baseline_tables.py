"""The tables of a baseline: values, estimators, subgroups outside, and what would have rung.

Knows how many digits and rows are worth showing. Must not know how a figure was worked out.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from monitor import stream_names, times
from monitor.baselining.assess import Baselines
from monitor.baselining.estimating import Estimate, Values
from monitor.baselining.outside import Outside
from replay.baseline_rings import Ring

SHOWN = 12
"""Rows of a table; the JSON object has them all."""


def centre(estimate: Estimate, written: Baselines, unit: str) -> Iterator[str]:
    """Centre and spread of each stream, and by every estimator."""
    places = _places(min(each.values.sigma for each in estimate.each))
    yield "Centre and spread" + (f" ({unit})" if unit else "")
    header = ("stream", "mean", "sigma", "sigma_between", "subgroups", "independent")
    rows: list[tuple[str, ...]] = [
        (
            stream_names.name(each.stream) or "all",
            *_values(each.values, places),
            f"{each.subgroups:,}",
            f"{math.floor(each.effective):,}",
        )
        for each in estimate.each[:SHOWN]
    ]
    if len(estimate.each) > 1 and written.common is not None:
        total = sum(each.effective for each in estimate.each)
        rows.append(
            (
                "together",
                *_values(estimate.common, places),
                f"{estimate.subgroups:,}",
                f"{math.floor(total):,}",
            )
        )
    yield from _table(header, rows)
    if len(estimate.each) > SHOWN:
        yield f"  … and {len(estimate.each) - SHOWN:,} more streams (--json has them all)"
    yield "  (independent: how many subgroups that do not follow each other would tell as much)"
    yield ""
    yield "  The same spread by other estimators:"
    yield from _estimators(estimate, places)


def _values(values: Values, places: int) -> tuple[str, str, str]:
    return (
        f"{values.mean:.{places}f}",
        f"{values.sigma:.{places}f}",
        f"{values.sigma_between:.{places}f}",
    )


def _estimators(estimate: Estimate, places: int) -> Iterator[str]:
    names: tuple[tuple[str, str], ...] = (
        ("pooled", "pooled"),
        ("from_ranges", "ranges"),
        ("from_sds", "sds"),
        ("moving_range", "moving range"),
        ("median_moving_range", "its median"),
        ("between_components", "between"),
        ("between_moving_range", "moving range of means"),
        ("total", "total"),
    )
    shown = [
        (key, name)
        for key, name in names
        if any(math.isfinite(getattr(each.spreads, key)) for each in estimate.each)
    ]
    rows = [
        (
            stream_names.name(each.stream) or "all",
            *(f"{getattr(each.spreads, key):.{places}f}" for key, _ in shown),
        )
        for each in estimate.each[:SHOWN]
    ]
    yield from _table(("stream", *(name for _, name in shown)), rows)


def strangers(points: Sequence[Outside], sigma: float) -> Iterator[str]:
    """Subgroups outside, with the limits they crossed."""
    places = _places(sigma)
    rows = [
        (
            times.format_time(point.time),
            stream_names.name(point.stream) or "all",
            "sd" if point.what == "spread" else "mean",
            f"{point.value:.{places}f}",
            f"{point.limit:.{places}f}",
        )
        for point in points[:SHOWN]
    ]
    yield from _table(("time", "stream", "what", "value", "limit"), rows)
    if len(points) > SHOWN:
        yield f"  … and {len(points) - SHOWN:,} more (--json has them all)"


def rings(found: Sequence[Ring]) -> Iterator[str]:
    """When the crew would have heard what."""
    rows = [
        (
            times.format_time(ring.time),
            stream_names.name(ring.stream) or "all",
            ring.detector,
            ring.rule,
        )
        for ring in found[:SHOWN]
    ]
    yield from _table(("time", "stream", "detector", "rule"), rows)
    if len(found) > SHOWN:
        yield f"  … and {len(found) - SHOWN:,} more (--json has them all)"


def _places(sigma: float) -> int:
    return max(0, 2 - math.floor(math.log10(sigma))) if sigma > 0 else 3


def _table(header: tuple[str, ...], rows: Sequence[tuple[str, ...]]) -> Iterator[str]:
    widths = [max(map(len, column)) for column in zip(header, *rows, strict=True)]
    left = {"stream", "time", "what", "detector", "rule"}
    for row in (header, *rows):
        cells = [
            cell.ljust(width) if title in left else cell.rjust(width)
            for title, cell, width in zip(header, row, widths, strict=True)
        ]
        yield "  " + "  ".join(cells).rstrip()
