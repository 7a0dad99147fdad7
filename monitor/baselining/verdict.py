"""May the baseline be trusted? Every reason for the verdict, each with what to do.

Knows which questions are asked. Must not know how figures were worked out, or where a verdict is
shown.
"""

from __future__ import annotations

from monitor.baselining import process_reasons, recording_reasons, upset_reasons
from monitor.baselining.delivered import Delivered
from monitor.baselining.estimating import Estimate
from monitor.baselining.material import Clues
from monitor.baselining.outside import Found
from monitor.baselining.reason import Reason, gravest_first, word

_CONSTANT = Reason(
    "refuse",
    "constant",
    "a stream's readings do not vary, so it has no spread to hold a change against",
    "look whether the gauge is stuck, or rounds what it shows",
)


def reasons(
    estimate: Estimate,
    outside: Found,
    left_out: int,
    clues: Clues,
    delivered: Delivered | None,
    unit: str,
) -> tuple[Reason, ...]:
    """Every reason, the gravest first; ``left_out`` subgroups were left out by hand."""
    if any(each.values.sigma <= 0 for each in estimate.each):
        return (_CONSTANT,)
    if word(found := _found(estimate, outside, left_out, clues, delivered, unit)) == "refuse":
        # What a promise costs is no question where there is no baseline.
        found = _found(estimate, outside, left_out, clues, None, unit)
    return gravest_first(found)


def _found(
    estimate: Estimate,
    outside: Found,
    left_out: int,
    clues: Clues,
    delivered: Delivered | None,
    unit: str,
) -> list[Reason]:
    # Where a gauge stood still, its centre did as well, and that is no news of the process.
    still = bool(clues.stuck) and clues.stuck[0].much
    return [
        *recording_reasons.promise(delivered),
        *upset_reasons.stuck(clues.stuck),
        *(() if still else process_reasons.wander(estimate, unit)),
        *process_reasons.mixed(estimate, clues),
        *process_reasons.following(estimate, delivered),
        *recording_reasons.amount(estimate),
        *recording_reasons.strangers(estimate, outside),
        *recording_reasons.resolution(estimate, clues, unit),
        *recording_reasons.form(estimate, outside, delivered),
        *process_reasons.between(estimate),
        *process_reasons.heads(estimate),
        *recording_reasons.rest(estimate, left_out, delivered),
    ]
