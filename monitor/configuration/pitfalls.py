"""What is allowed in a configuration and will bite on the line all the same.

Knows plans and what has gone wrong with their like. Must not know where its words are shown.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from monitor import stream_names, times
from monitor.configuration import false_alarms, pace, spans
from monitor.configuration.false_alarms import DetectorRinging
from monitor.plan import (
    ByCount,
    ByWindow,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    Judgement,
    Plan,
    Scheme,
    ShewhartPlan,
    Stream,
)

TRUNCATING = 4.0
"""Standard deviations from the mean to a plausible limit. A normal gauge shows one reading in
16,000 beyond four; a drift of one or two would already lose some of those it is to be known by."""

COARSE = 0.5
"""Of sigma. Where readings move in steps as large, a limit three sigma away may lie anywhere from
2.75 to 3.25 as it falls on the grid, and is crossed twice or half as often as it says; means of
several readings suffer less, ranges and runs as much."""


@dataclass(frozen=True, slots=True)
class Pitfall:
    """A key, what will happen and what to write instead."""

    key: str
    wrong: str
    instead: str

    def __str__(self) -> str:
        return f"{self.key} {self.wrong}; {self.instead}"


def pitfalls(plan: Plan) -> list[Pitfall]:
    """All of them, in the order of the configuration."""
    found = [
        Pitfall(f"characteristics.{each.name}.{key}", wrong, instead)
        for each in plan.characteristics
        for key, wrong, instead in _of(each)
    ]
    rings = false_alarms.total(plan.characteristics).together
    if rings > 1.0 and not any(".detectors[" in each.key for each in found):
        wrong = f"ring {spans.number(rings)} times in 8 h with nothing wrong, all together"
        found.append(Pitfall("characteristics", wrong, "widen what rings most"))
    return found


Found = tuple[str, str, str]


def _of(plan: CharacteristicPlan) -> Iterator[Found]:
    yield from _unjudged(plan)
    yield from _filters(plan)
    yield from _resolution(plan)
    if isinstance(plan.subgroup, ByCount):
        yield from _gaps(plan, plan.subgroup)
    else:
        yield from _windows(plan, plan.subgroup)
    _, judgement = plan.example()
    for index, detector in enumerate(judgement.detectors if judgement else ()):
        yield from _rings(plan, detector, f"detectors[{index}]")


def _amount(plan: CharacteristicPlan, value: float) -> str:
    return f"{value:.4g} {plan.unit}".rstrip()


def _judgements(plan: CharacteristicPlan) -> list[tuple[Stream, Judgement]]:
    common = [] if plan.judgement is None else [((), plan.judgement)]
    return [*common, *plan.by_stream.items()]


def _filters(plan: CharacteristicPlan) -> Iterator[Found]:
    source = plan.source
    sides = (
        ("lower", source.plausible_lower, -1.0),
        ("upper", source.plausible_upper, 1.0),
    )
    for key, limit, sign in sides:
        near: list[tuple[float, Stream, float]] = []
        for stream, judgement in _judgements(plan):
            baseline = judgement.baseline
            sd = math.hypot(baseline.sigma, baseline.sigma_between)
            away = sign * (limit - baseline.mean) / sd
            if away < TRUNCATING:
                near.append((away, stream, baseline.mean + sign * 2 * TRUNCATING * sd))
        if near:
            away, stream, enough = min(near)
            whose = f" of {stream_names.name(stream)}" if stream else ""
            wrong = (
                f"lies {spans.number(away)} standard deviations from the mean{whose}: readings "
                "beyond are set aside, and a drift that way is seen late or not at all"
                if away > 0
                else f"lies on the wrong side of the mean{whose}: most readings are set aside"
            )
            instead = f"write what the gauge can show at all, {_amount(plan, enough)} or beyond"
            yield f"source.plausible.{key}", wrong, instead
    if source.payload == "json" and any(p == source.value for p, _ in source.use_if):
        wrong = "keeps only some values of the reading itself, and so hides how they are spread"
        yield "source.use_if", wrong, "write plausible: with what the gauge can show at all"


def _unjudged(plan: CharacteristicPlan) -> Iterator[Found]:
    named, expected = len(plan.by_stream), plan.source.expected_streams or 0
    if plan.judgement is None and plan.learn is None and named < expected:
        those = f"{named} of the {expected} streams that are expected"
        wrong = f"names {those}: the others are never judged"
        yield "baseline.by_stream", wrong, "add theirs, or mean: and sigma: for all others"


def _resolution(plan: CharacteristicPlan) -> Iterator[Found]:
    sigma = min((each.baseline.sigma for _, each in _judgements(plan)), default=math.inf)
    if plan.resolution is not None and plan.resolution > COARSE * sigma:
        wrong = (
            f"is coarser than half of sigma ({_amount(plan, sigma)}): readings fall on so few "
            "values that run lengths, ranges and runs are no longer those of the textbook"
        )
        instead = "take a finer reading from the gauge, or chart means of larger subgroups"
        yield "resolution", wrong, instead


def _gaps(plan: CharacteristicPlan, subgroup: ByCount) -> Iterator[Found]:
    rate, gap, charts = plan.source.expected_rate, subgroup.max_gap, _charts(plan)
    if rate is None or gap is None or (subgroup.size == 1 and "moving_range" not in charts):
        return
    many = pace.least_streams(plan)
    spacing = many / rate
    if gap / times.SECOND >= 2 * spacing:
        return
    of = f" of one stream, if there are {many}" if many > 1 else ""
    usual = f"the usual {spans.short(spacing)} between readings{of}"
    single = subgroup.size == 1
    if gap / times.SECOND <= spacing:
        lost = "moving range is left blank" if single else "subgroup is given up"
        wrong = f"is not longer than {usual}: nearly every {lost}"
    else:
        lost = "leaves a moving range blank" if single else "gives a subgroup up"
        wrong = f"is less than twice {usual}: one that is missing {lost}"
    instead = f"write {spans.short(3 * spacing)} or more, or leave max_gap out"
    yield "subgroup.max_gap", wrong, instead


def _windows(plan: CharacteristicPlan, subgroup: ByWindow) -> Iterator[Found]:
    rate = plan.source.expected_rate
    if rate is None:
        return
    many = pace.least_streams(plan)
    expected = rate * subgroup.window / times.SECOND / many
    if expected < subgroup.min_size:
        each = f" of each of {many} streams" if many > 1 else ""
        wrong = (
            f"is more than the {spans.number(expected)} readings{each} that are expected in a "
            "window: most windows are given up"
        )
        yield "subgroup.min_size", wrong, "write a smaller one, or a longer window"


def _charts(plan: CharacteristicPlan) -> set[str]:
    _, judgement = plan.example()
    if judgement is None:
        return {each.given.chart for each in plan.learn.detectors} if plan.learn else set()
    return {each.scheme.chart for each in judgement.detectors}


def _rings(plan: CharacteristicPlan, detector: DetectorPlan, key: str) -> Iterator[Found]:
    ringing = false_alarms.of_detector(plan, detector)
    whole, often = ringing.whole, ringing.whole.in_a_shift
    if often is None or often <= 1.0:
        return
    coming = pace.pace(plan)
    each = " in each stream" if coming is not None and coming.each else ""
    wrong = (
        f"({detector.name}) rings with nothing wrong once in {spans.long(whole.seconds or 0.0)}"
        f"{each}, {spans.number(often)} times in 8 h"
    )
    yield key, wrong, _remedy(detector.scheme, ringing)


def _remedy(scheme: Scheme, ringing: DetectorRinging) -> str:
    if isinstance(scheme, CusumPlan):
        return "write a larger h"
    if not isinstance(scheme, ShewhartPlan) or len(scheme.rules) == 1:
        return "write a larger width"
    rates = [
        (each.in_a_shift or 0.0, rule.rule)
        for each, rule in zip(ringing.rules, scheme.rules, strict=True)
    ]
    return f"its rule {max(rates)[1]} rings most: leave it out, or take subgroups less often"
