"""A baseline as one JSON object, for programs.

Knows names of members. Must not know how a figure was worked out, or how people read it.
"""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

from monitor import stream_names, times
from monitor.baselining.estimating import StreamEstimate
from monitor.baselining.outside import Outside
from replay.baseline import Estimated
from replay.baseline_file import values
from replay.baseline_rings import Rung


def as_json(estimated: Estimated, written: str | None) -> dict[str, Any]:
    """The whole judgement; ``written``: where the baseline was written. Figures that cannot be had
    are null."""
    found = estimated.assessment
    estimate = found.estimate
    document: dict[str, Any] = _known(
        {
            "verdict": found.verdict,
            "characteristic": estimated.readings.plan.name,
            "unit": estimated.readings.plan.unit,
            "reasons": [asdict(reason) for reason in found.reasons],
            "baseline": values(found.baselines),
            "written": written,
            "first": times.format_time(estimate.first),
            "last": times.format_time(estimate.last),
            "readings": estimate.readings,
            "set_aside": estimated.readings.set_aside,
            "subgroups": estimate.subgroups,
            "abandoned": estimated.abandoned,
            "left_out": {
                "by_time": estimated.in_spans,
                "outside": estimated.left_outside_subgroups,
                "points": [_outside(point) for point in estimated.left_outside],
            },
            "streams": [_stream(each) for each in estimate.each],
            "skipped": [stream_names.name(stream) for stream in found.skipped],
            "heads": None
            if estimate.heads is None
            else {**asdict(estimate.heads), "differ": estimate.differ},
            "following": {
                "correlation": estimate.correlation,
                "follows": estimate.follows,
                "inflation": estimate.inflation,
            },
            "wander": None
            if estimate.wander is None
            else {**asdict(estimate.wander), "wanders": estimate.wander.wanders},
            "moved": [
                {
                    "stream": stream_names.name(each.stream),
                    "time": times.format_time(each.time),
                    "by": each.by,
                    "share": each.share,
                }
                for each in estimate.moved
            ],
            "stuck": [
                {
                    "stream": stream_names.name(each.stream),
                    "readings": each.readings,
                    "first": times.format_time(each.first),
                    "last": times.format_time(each.last),
                    "runs": each.runs,
                    "share": each.share,
                }
                for each in estimated.clues.stuck
            ],
            "shape": None if estimate.shape is None else asdict(estimate.shape),
            "resolution": estimated.clues.step,
            "cycle": None if estimated.clues.cycle is None else asdict(estimated.clues.cycle),
            "outside": [_outside(point) for point in found.outside.points],
            "beyond_three": found.outside.beyond_three,
            "promise": None if found.delivered is None else asdict(found.delivered),
            "rings": None if estimated.rung is None else _rings(estimated.rung),
        }
    )
    return document


def _stream(each: StreamEstimate) -> dict[str, Any]:
    return {
        "stream": stream_names.name(each.stream),
        "subgroups": each.subgroups,
        "effective": each.effective,
        "readings": each.readings,
        **asdict(each.values),
        "estimates": asdict(each.spreads),
        "f_between_subgroups": None if each.components is None else each.components.ratio,
        "skewness": None if each.shape is None else each.shape.skewness,
        "kurtosis": None if each.shape is None else each.shape.kurtosis,
    }


def _rings(rung: Rung) -> dict[str, Any]:
    return {
        "alerts": len(rung.rings),
        "expected": rung.expected,
        "chance": rung.chance,
        "too_many": rung.too_many,
        "kept": rung.kept,
        "subgroups": rung.subgroups,
        "at_left_outside": rung.strangers,
        "by_detector": rung.by_detector,
        "each": [
            {
                "stream": stream_names.name(ring.stream),
                "time": times.format_time(ring.time),
                "detector": ring.detector,
                "rule": ring.rule,
                "direction": ring.direction,
                "left_outside": ring.stranger,
            }
            for ring in rung.rings
        ],
    }


def _outside(point: Outside) -> dict[str, Any]:
    return {
        "stream": stream_names.name(point.stream),
        "time": times.format_time(point.time),
        "what": point.what,
        "value": point.value,
        "limit": point.limit,
    }


def _known(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _known(each) for key, each in value.items()}
    if isinstance(value, list | tuple):
        return [_known(each) for each in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value
