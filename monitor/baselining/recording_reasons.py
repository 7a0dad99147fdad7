"""What a recording lacks for a baseline, and what to do about it.

Knows what to demand of a recording (methods, "What breaks textbook promises in line"). Must not
know how figures were worked out.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

from monitor import stream_names, times
from monitor.baselining.delivered import Delivered
from monitor.baselining.demands import ENOUGH, LEAST, NEARLY, SHIFT
from monitor.baselining.estimating import Estimate
from monitor.baselining.material import Clues
from monitor.baselining.outside import Found
from monitor.baselining.reason import Grade, Reason, part
from monitor.configuration import spans

_COARSE, _TOO_COARSE = 0.5, 1.5
_SOME_OUTSIDE, _MANY_OUTSIDE = 0.001, 0.05
_COSTLY = 0.5
_LITTLE = 0.25
_HEAVY = 1.0


def amount(estimate: Estimate) -> Iterator[Reason]:
    """Is there enough of it?"""
    effective = math.floor(estimate.least_effective)
    weakest = estimate.weakest
    whose = "there are" if weakest is None else f"{stream_names.name(weakest)} has"
    worth = (
        f" (successive ones follow each other, so the {estimate.subgroups:,} are worth fewer)"
        if estimate.inflation > 1.05
        else ""
    )
    # Where a stream moved, how they differ and what they are worth is told once that is gone.
    if effective < (LEAST if estimate.stayed else ENOUGH):
        yield Reason(
            "refuse" if effective < LEAST else "provisional",
            "few",
            f"{whose} only {effective:,} independent subgroups to estimate from{worth}; "
            f"{ENOUGH:,} are enough",
            "record for longer" if effective < LEAST else "estimate again from a longer recording",
        )
    span = estimate.last - estimate.first
    if span < NEARLY * SHIFT:
        yield Reason(
            "provisional",
            "short",
            f"the readings span {spans.long(span / times.SECOND)}: what changes within a "
            "shift had no chance to show",
            "estimate again from 8 h or more, over a change of material if there is one",
        )


def strangers(estimate: Estimate, outside: Found) -> Iterator[Reason]:
    """Are there subgroups that do not belong to the rest?"""
    out, total = len(outside.points), estimate.subgroups
    if not out:
        return
    share = out / total
    grade: Grade = "note"
    if share > _SOME_OUTSIDE:
        grade = "refuse" if share > _MANY_OUTSIDE else "provisional"
    yield Reason(
        grade,
        "outside",
        f"{out:,} of {total:,} subgroups lie outside limits that chance hardly ever crosses "
        f"({100 * share:.2g} %); they are part of the estimate",
        "look up what happened at the times listed; where there was a cause, estimate again "
        "without them: driftbell-replay baseline has --leave-out TIME or FROM/TO (or outside)",
    )


def resolution(estimate: Estimate, clues: Clues, unit: str) -> Iterator[Reason]:
    """Does the gauge show steps fine enough?"""
    step = clues.step
    sigma = min(each.values.sigma for each in estimate.each)
    if step is None or step <= _COARSE * sigma:
        return
    yield Reason(
        "refuse" if step > _TOO_COARSE * sigma else "provisional",
        "resolution",
        f"the gauge's smallest step, {_amount(step, unit)}, is {step / sigma:.2g} times "
        "sigma: readings fall on so few values that limits and run lengths are no longer those "
        "of the textbook",
        "take a finer reading from the gauge, or judge means of larger subgroups",
    )


def form(estimate: Estimate, outside: Found, delivered: Delivered | None) -> Iterator[Reason]:
    """Are means normal enough?"""
    shape, delivered = estimate.shape, delivered
    if shape is None:
        return
    if skewed(estimate):
        left = 1.0 if delivered is None else delivered.of_skewness
        cost = "" if delivered is None else f", which leaves {part(left)} of the promise"
        yield Reason(
            "provisional" if left < _COSTLY else "note",
            "skewness",
            f"means are skewed (skewness {shape.skewness:.2f}){cost}",
            "watch means of larger subgroups, catch with a smaller k, or write clip: 3",
        )
    if shape.kurtosis > max(_HEAVY, 4 * shape.kurtosis_error):
        yield Reason(
            "provisional",
            "tails",
            f"extreme means are frequent: {outside.beyond_three:,} lie beyond three standard "
            f"errors, where {spans.number(outside.expected)} would if they were normal",
            "write clip: 3 at the CUSUM and the EWMA, and no narrow Shewhart limits",
        )


def rest(estimate: Estimate, left_out: int, delivered: Delivered | None) -> Iterator[Reason]:
    """Was much left out, and is the promise too long for it?"""
    if left_out > _MANY_OUTSIDE * (left_out + estimate.subgroups):
        yield Reason(
            "provisional",
            "left-out",
            f"{left_out:,} subgroups were left out: what is so frequent will come again, and ring",
            "find its cause, or record again once it is gone",
        )
    if delivered is not None and delivered.of_estimation < _LITTLE:
        yield Reason(
            "provisional",
            "long-promise",
            "with so long an interval between false alarms, an estimate from this recording "
            f"may keep only {part(delivered.of_estimation)} of it",
            "estimate from a longer recording, or ask for no longer an interval than you need",
        )


def promise(delivered: Delivered | None) -> Iterator[Reason]:
    """May the configured detectors be put on the line with it?"""
    if delivered is None or not delivered.broken:
        return
    longer = delivered.of_estimation <= min(delivered.of_following, delivered.of_skewness)
    yield Reason(
        "provisional",
        "promise",
        "with the configured detectors it may ring as often as once in "
        f"{spans.number(delivered.rings)} subgroups instead of {spans.number(delivered.subgroups)}",
        "first estimate from a longer recording"
        if longer
        else "first let `driftbell-replay tune` find detectors that keep the promise on this "
        "recording",
    )


def skewed(estimate: Estimate) -> bool:
    """Whether means are skewed, more than chance explains."""
    shape = estimate.shape
    return shape is not None and abs(shape.skewness) > max(0.05, 4 * shape.skewness_error)


def _amount(value: float, unit: str) -> str:
    return f"{value:.3g} {unit}".rstrip()
