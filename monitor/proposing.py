"""What was learned of a stream, as a proposal for its baseline, and whether it may be taken.

Knows how a baseline is assessed and what is judged by one. Must not know when, or who reads it.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from monitor import times
from monitor.baselining.assess import Baselines, assess
from monitor.baselining.material import Clues, StreamSubgroups
from monitor.baselining.reason import Reason
from monitor.judging import judgement
from monitor.messages import SCHEMA, BaselineMessage, ReasonField
from monitor.plan import CharacteristicPlan, DetectorPlan, Judgement, LearnPlan, Stream
from monitor.solving import UnsolvableError

_DIGITS = 7
"""Of a learned figure: more than any recording tells, and few enough to be written down."""

_LEAST = 1e-100
"""Of a sigma, as a configuration takes it: the square of a smaller one would be lost."""


@dataclass(frozen=True, slots=True)
class Proposed:
    """``judgement`` is None where the baseline may not be trusted. ``refused``: the subgroups do
    not describe a process that has a baseline, so more of them would not either."""

    message: BaselineMessage
    judgement: Judgement | None
    refused: bool


def propose(
    plan: CharacteristicPlan, learn: LearnPlan, stream: Stream, gathered: StreamSubgroups
) -> Proposed:
    """Judge what was gathered of one stream; of two subgroups or more."""
    unsolvable: list[UnsolvableError] = []

    def detectors(baselines: Baselines) -> Callable[[Stream], tuple[DetectorPlan, ...]]:
        try:
            values = _values(baselines, stream)
            if values[1] < _LEAST:
                wrong = f"a sigma of {values[1]:.2g} is too small to reckon with"
                raise UnsolvableError("", wrong, "look whether the gauge is stuck")
            judged = judgement(*values, learn.detectors)
        except UnsolvableError as error:
            unsolvable.append(error)
            return lambda _: ()
        return lambda _: judged.detectors

    found = assess([gathered], Clues(), detectors, unit=plan.unit)
    reasons = found.reasons
    if unsolvable:
        (error,) = unsolvable
        why = f"{error.key} {error.wrong}".lstrip()
        wrong = f"its detectors cannot be worked out from it: {why}"
        reasons = (Reason("refuse", "unsolvable", wrong, error.instead), *reasons)
    verdict = "refuse" if unsolvable else found.verdict
    mean, sigma, between = _values(found.baselines, stream)
    trusted = None
    if verdict == "trust":
        trusted = judgement(mean, sigma, between, learn.detectors)
    shrunk = found.delivered
    message = BaselineMessage(
        schema=SCHEMA,
        characteristic=plan.name,
        title=plan.title,
        stream=dict(stream),
        time=times.format_time(int(gathered.time[-1])),
        verdict=verdict,
        reasons=[
            ReasonField(grade=each.grade, kind=each.kind, found=each.found, do=each.do)
            for each in reasons
        ],
        adopted=trusted is not None and learn.adopt,
        mean=mean,
        sigma=sigma,
        sigma_between=between,
        unit=plan.unit,
        subgroups=found.estimate.subgroups,
        effective=math.floor(found.estimate.least_effective),
        first=times.format_time(int(gathered.time[0])),
        last=times.format_time(int(gathered.time[-1])),
        promise_kept=None if shrunk is None else _rounded(shrunk.unlucky),
    )
    return Proposed(message, trusted, verdict == "refuse")


def _values(baselines: Baselines, stream: Stream) -> tuple[float, float, float]:
    values = baselines.of(stream)
    return _rounded(values.mean), _rounded(values.sigma), _rounded(values.sigma_between)


def _rounded(value: float) -> float:
    return float(f"{value:.{_DIGITS}g}")
