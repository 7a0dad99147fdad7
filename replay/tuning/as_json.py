"""A result as one JSON object.

Knows the object's keys. Must not know how figures were worked out.
"""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

from monitor import stream_names
from monitor.times import format_time
from replay.tuning.ranking import keeps
from replay.tuning.result import (
    Delay,
    Grouping,
    Part,
    Quantile,
    Range,
    Result,
    Setting,
    Shown,
    Together,
)


def as_json(result: Result) -> dict[str, Any]:
    """Durations are seconds of running time, ``readings`` pieces of the drifting stream, instants
    ISO 8601; what is too long for a number, or unlimited, is null."""
    return {
        "characteristic": result.characteristic,
        "unit": result.unit,
        "recordings": [asdict(each) for each in result.sources],
        "seed": result.seed,
        "false_alarm_every": result.promise,
        "catch": list(result.catch),
        "ignore": list(result.ignore),
        "catch_ratio": result.ratio,
        "trusted": result.trusted,
        "with_care": result.with_care,
        "trust": result.trust,
        "recording": {
            **_part(result.whole),
            "set_aside": dict(result.set_aside),
            "resolution": result.resolution,
            "fit": _part(result.fit),
            "proof": _part(result.proof),
            "streams": {each.stream: each.readings for each in result.streams},
        },
        "groupings": [_grouping(each) for each in result.groupings],
        "together": None if result.together is None else _together(result.together),
        "proposed": None if result.proposed is None else _together(result.proposed),
        "settings": [_setting(each, result) for each in result.settings],
        "refused": [asdict(each) for each in result.refusals],
        "best": _taken(result.best, result),
        "best_spread": _taken(result.best_spread, result),
        "breaking": list(result.breaking),
    }


def _taken(place: int | None, result: Result) -> dict[str, Any] | None:
    if place is None:
        return None
    found = result.settings[place]
    return {"name": found.name, **_as_configured(found, result)}


def _together(found: Together) -> dict[str, Any]:
    return {
        "name": found.name,
        "detectors": list(found.detectors),
        "not_in_delays": list(found.unfollowed),
        "signals": found.signals,
        "standing": found.standing,
        **_shown(found),
    }


def _part(part: Part) -> dict[str, Any]:
    return {
        "first": format_time(part.first),
        "last": format_time(part.last),
        "running_seconds": part.running,
        "readings": part.readings,
    }


def _grouping(found: Grouping) -> dict[str, Any]:
    return {
        "size": found.size,
        "said": found.said,
        "subgroups": {"fit": found.fit, "proof": found.proof, "per_second": found.rate},
        "autocorrelation": found.correlation,
        "wander": {
            "wanders": found.wander.wanders,
            "growth": found.wander.growth,
            "limit": found.wander.limit,
            "moved": [
                {
                    "stream": stream_names.name(each.stream),
                    "time": format_time(each.time),
                    "by": each.by,
                    "share": each.share,
                }
                for each in found.wander.moved
            ],
        },
        "supports": found.supports,
        "baseline": {
            each.stream: {
                "mean": each.mean,
                "sigma": each.sigma,
                "sigma_between": each.sigma_between,
            }
            for each in found.baselines
        },
    }


def _setting(found: Setting, result: Result) -> dict[str, Any]:
    return {
        "name": found.name,
        "rank": found.rank,
        "unranked": found.unranked or None,
        "origin": found.origin,
        **_as_configured(found, result),
        "catch": found.catch,
        "ignore": found.ignore,
        **_shown(found),
    }


def _shown(found: Shown) -> dict[str, Any]:
    told = found.extrapolated
    events = found.events
    return {
        "asked": found.asked,
        "false_alarms": {
            "seen": found.observed.alarms,
            "seconds": found.observed.seconds,
            "interval": _range(found.observed.interval),
        },
        "interval": None
        if told is None
        else {
            "seconds": told.seconds,
            "factor": _finite(told.factor),
            "low": told.interval.low,
            "high": told.interval.high,
            "counted": told.counted,
        },
        "no_interval": found.no_interval or None,
        "meets": found.meets,
        "keeps": keeps(found),
        "delays": [_delay(each) for each in found.delays],
        "curve": [_delay(each) for each in found.curve],
        "events": None if events is None else asdict(events),
    }


def _as_configured(found: Setting, result: Result) -> dict[str, Any]:
    return {
        "kind": found.kind,
        "chart": found.chart,
        "size": result.groupings[found.grouping].size,
        "constants": dict(found.constants),
    }


def _delay(found: Delay) -> dict[str, Any]:
    return {
        "shape": found.shape,
        "amount": found.amount,
        "onsets": found.onsets,
        "caught": found.caught,
        "horizon": found.horizon,
        "readings": {
            "median": _quantile(found.median_readings),
            "late": _quantile(found.late_readings),
            "floor": found.floor_readings,
        },
        "seconds": {
            "median": _quantile(found.median_seconds),
            "late": _quantile(found.late_seconds),
            "floor": found.floor_seconds,
        },
    }


def _quantile(found: Quantile) -> dict[str, Any]:
    interval = found.interval
    return {
        "value": found.value,
        "low": None if interval is None else interval.low,
        "high": None if interval is None else interval.high,
    }


def _range(found: Range | None) -> dict[str, Any] | None:
    return None if found is None else {"low": found.low, "high": found.high}


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
