"""A baseline and declared detectors, made into what a stream is held against.

Knows decision revisions. Must not know YAML, or where a baseline comes from: one that is learned on
the line and then written down is judged by under the same revisions.
"""

from __future__ import annotations

import hashlib
from typing import Any

import rfc8785

from monitor.plan import BaselinePlan, DeclaredDetector, DetectorPlan, Intent, Judgement
from monitor.solving import solved


def judgement(
    mean: float, sigma: float, sigma_between: float, detectors: tuple[DeclaredDetector, ...]
) -> Judgement:
    """What a stream with that baseline is held against.

    A revision hashes {baseline, detector, promise, source, subgroup}. Only the baseline differs
    between ten thousand streams, and its key sorts first, so the rest of the canonical text is made
    once, in ``decides``. Raises UnsolvableError where an intent cannot be met.
    """
    declared = canonical(
        # A default that is written down changes nothing.
        {"mean": mean, "sigma": sigma} | ({"sigma_between": sigma_between} if sigma_between else {})
    )
    baseline = BaselinePlan(mean, sigma, sigma_between, _digest(declared))
    before = b'{"baseline":' + declared + b","
    return Judgement(
        baseline,
        tuple(
            DetectorPlan(
                each.name,
                each.kind,
                solved(each.given, baseline) if isinstance(each.given, Intent) else each.given,
                _digest(before + each.decides[1:].encode()),
                each.given if isinstance(each.given, Intent) else None,
            )
            for each in detectors
        ),
    )


def canonical(value: dict[str, Any]) -> bytes:
    """The one JSON text of a value (RFC 8785)."""
    return rfc8785.dumps(value)


def _digest(text: bytes) -> str:
    return hashlib.sha256(text).hexdigest()[:32]
