"""A baseline as a file: what ``monitor.configuration.sections.baseline.BaselineFile`` reads.

Knows that file's keys and how many digits are worth writing. Must not know where it is written.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import yaml

from monitor import stream_names, times
from monitor.baselining.assess import Baselines
from monitor.baselining.estimating import Values
from replay.baseline import Choices, Estimated

_DIGITS = 4
"""Digits of sigma that are written; the mean has as many decimals."""


@dataclass(frozen=True, slots=True)
class RecordedFile:
    """A recording: its file's name and SHA-256, 64 hexadecimal digits."""

    name: str
    sha256: str


def values(baselines: Baselines) -> dict[str, Any]:
    """The keys of a baseline, rounded as they are written."""
    if baselines.common is not None:
        return _rounded(baselines.common)
    return {
        "by_stream": {
            stream_names.name(stream): _rounded(own) for stream, own in baselines.by_stream.items()
        }
    }


def _rounded(own: Values) -> dict[str, float]:
    if own.sigma <= 0:
        return {"mean": own.mean, "sigma": own.sigma}
    places = _DIGITS - 1 - math.floor(math.log10(own.sigma))
    written = {"mean": round(own.mean, places), "sigma": round(own.sigma, places)}
    between = round(own.sigma_between, places)
    return written | ({"sigma_between": between} if between else {})


def text(
    estimated: Estimated, choices: Choices, recordings: Sequence[RecordedFile], note: str
) -> str:
    """The whole file, as YAML."""
    plan, found = estimated.readings.plan, estimated.assessment.estimate
    chosen: dict[str, Any] = {
        "sigma": "moving-range" if found.single else choices.sigma,
        "sigma_between": choices.between,
    }
    if choices.spans:
        chosen["left_out_by_time"] = estimated.in_spans
    if choices.outside:
        chosen["left_out_outside"] = estimated.left_outside_subgroups
    document = {
        "version": 1,
        "characteristic": plan.name,
        **({"unit": plan.unit} if plan.unit else {}),
        **values(estimated.assessment.baselines),
        "origin": {
            "recordings": [{"name": each.name, "sha256": each.sha256} for each in recordings],
            "first": times.format_time(found.first),
            "last": times.format_time(found.last),
            "counts": {
                "readings": found.readings,
                "set_aside": sum(estimated.readings.set_aside.values()),
                "subgroups": found.subgroups,
                "streams": len(found.each),
            },
            "choices": chosen,
            "note": note,
        },
    }
    written: str = yaml.safe_dump(document, sort_keys=False, allow_unicode=True, width=100)
    return written
