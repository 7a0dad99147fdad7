"""Why an alert rang, in words and figures, for the person who stands before the line.

It answers, in this order: what rang, and is it still so? What came of it? What was it judged by,
and is it judged so today? Which points made it ring, and does the arithmetic hold? When did it
begin? Could it be chance? What is to be done? Knows ``Explanation``. Must not know journals.
"""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterator

from monitor import stream_names, times, units
from monitor.configuration import false_alarms, pace, spans
from monitor.explaining.explain import Explanation
from monitor.explaining.explain_table import Table, charted
from monitor.explaining.working import Rung, Working, rule_of
from monitor.messages import AlertEvent
from monitor.plan import (
    BaselinePlan,
    ByCount,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    RulePlan,
    ShewhartPlan,
)

_WIDTH = 100
_BOUND = "\u00a0"  # no line is broken here; it is printed as a plain space
_LIFE = 10  # events at each end of a long one


def lines(told: Explanation) -> Iterator[str]:
    """Line by line."""
    event = told.told
    yield event["text"]
    yield ""
    yield from _entry("Alert", *_alert(told))
    yield from _entry("Life", *_life(told))
    if told.detector is not None and told.judgement is not None:
        yield from _entry("Judged by", *_judged_by(told, told.detector, told.judgement.baseline))
        rung = Rung.of(event, told.detector, told.judgement.baseline)
        if rung is not None and told.working is not None:
            yield from _entry("Worked out", *_worked_out(told, told.working, rung))
            yield ""
            yield from Table(told.working, rung, told.plan.unit).lines()
            yield ""
            yield from _entry("It rang", *_it_rang(told.working, rung, told.plan.unit))
        yield from _entry("Began", *_began(event))
        yield from _entry("Chance", _chance(told.plan, told.detector))
    yield from _entry("To do", *event["reaction"], event["caution"])


def _entry(label: str, *sentences: str) -> Iterator[str]:
    for index, sentence in enumerate(sentences):
        yield textwrap.fill(
            sentence,
            _WIDTH,
            initial_indent=(label if index == 0 else "").ljust(12),
            subsequent_indent=" " * 14,
            break_long_words=False,
            break_on_hyphens=False,
        ).replace(_BOUND, " ")


def _alert(told: Explanation) -> Iterator[str]:
    event = told.told
    stream = stream_names.name(tuple(sorted(event["stream"].items())))
    where = " ".join(filter(None, [event["characteristic"], stream]))
    yield (f"{event['id']}, {'open' if told.is_open else 'over'}, priority {event['priority']}")
    yield f"{where}, detector {event['detector']}, rule {event['rule']}"


def _life(told: Explanation) -> Iterator[str]:
    events = told.events
    if events[0]["event"] != "raised":
        yield "what came before is no longer in the journal"
    for index, event in enumerate(events):
        if _LIFE <= index < len(events) - _LIFE:
            if index == _LIFE:
                yield f"… {len(events) - 2 * _LIFE:,} more; --json has them all"
            continue
        why = f" ({event['reason']})" if event["reason"] else ""
        yield f"{_moment(event['time'])}  {event['event']}{why}: {event['text']}"


def _judged_by(told: Explanation, detector: DetectorPlan, baseline: BaselinePlan) -> Iterator[str]:
    plan = told.plan
    unit = _unit(plan.unit)
    between = (
        f", sigma_between {baseline.sigma_between:.12g}{unit}" if baseline.sigma_between else ""
    )
    yield (
        f"baseline {baseline.revision[:8]}: mean {baseline.mean:.12g}{unit}, "
        f"sigma {baseline.sigma:.12g}{unit}{between}"
    )
    yield _subgroups(plan)
    yield _scheme(detector)
    tolerance = plan.specification
    if tolerance is not None:
        limits = [
            f"{name} {value:.12g}"
            for name in ("lower", "nominal", "upper")
            if (value := getattr(tolerance, name)) is not None
        ]
        yield f"specification {', '.join(limits)}{unit}: shown beside alerts, it moves no limit"
    yield {
        True: "it is judged so today",
        False: "the configuration has been changed since: today it is judged otherwise",
        None: "how it is judged today is not known",
    }[told.unchanged]


def _subgroups(plan: CharacteristicPlan) -> str:
    subgroup = plan.subgroup
    if not isinstance(subgroup, ByCount):
        window = times.format_duration(subgroup.window)
        return f"subgroups: all readings of each {window}, {subgroup.min_size} at least"
    each = "each reading by itself" if subgroup.size == 1 else f"{subgroup.size} readings in a row"
    every = f", every {times.format_duration(subgroup.every)}" if subgroup.every else ""
    gap = f", no gap above {times.format_duration(subgroup.max_gap)}" if subgroup.max_gap else ""
    return f"subgroups: {each}{every}{gap}"


def _scheme(detector: DetectorPlan) -> str:
    match detector.scheme:
        case CusumPlan(chart="variance") as s:
            constants = "CUSUM of the variance"
            for name, k, h in s.sums():
                constants += f", {name.replace('_', ' ')} k {k:.6g} and h {h:.6g}"
            constants += " times the usual variance"
            constants += f", head start {s.head_start:g}" if s.head_start else ""
        case CusumPlan() as s:
            constants = f"CUSUM of the {s.chart}, k {s.k:.6g}, h {s.h:.6g}"
            constants += f", head start {s.head_start:g}" if s.head_start else ""
        case EwmaPlan() as s:
            limits = "asymptotic" if s.asymptotic else "exact"
            constants = f"EWMA of the {s.chart}, lambda {s.lam:.6g}, width {s.width:.6g}, {limits}"
        case ShewhartPlan() as s:
            rules = ", ".join(map(_rule, s.rules))
            exact = " of exact limits" if s.exact else ""
            constants = (
                f"Shewhart chart of the {charted(s.chart)}, width {s.width:.6g}{exact}: {rules}"
            )
    scheme = detector.scheme
    if not isinstance(scheme, ShewhartPlan):
        constants += f", clip {scheme.clip:g}" if scheme.clip is not None else ""
        constants += ", holding after a signal" if scheme.hold else ""
    only = {"both": "", "up": "; rises only", "down": "; falls only"}[scheme.direction]
    return f"{detector.name}: {constants}{only}"


def _rule(rule: RulePlan) -> str:
    width = f" {rule.width:.6g}" if rule.width else ""
    match rule.rule:
        case "outside":
            return f"outside{width}"
        case "zone":
            return f"zone {rule.count} of {rule.of} beyond{width}"
        case "stratification":
            return f"stratification of {rule.length} within{width}"
        case "mixture":
            return f"mixture of {rule.length} beyond{width}"
        case _:
            return f"{rule.rule} of {rule.length}"


def _worked_out(told: Explanation, working: Working, rung: Rung) -> Iterator[str]:
    unit = _unit(told.plan.unit)
    if told.source == "entries":
        yield "from the readings, which the journal still holds and the engine folded again"
    else:
        kept = (
            "the means of its last subgroups" if len(working.steps) > 1 else "the point that rang"
        )
        yield f"from what was kept with the alert, as its readings are gone: {kept}"
    yield {
        "exactly": "it gives the figures of the alert to the last digit",
        "to rounding": "it gives the figures of the alert, but for rounding",
    }.get(
        told.agrees or "",
        "IT DOES NOT GIVE THE FIGURES OF THE ALERT: another version may have judged it",
    )
    if rung.is_squared:
        yield from _of_squares(told, rung)
        return
    size = rung.subgroup["size"]
    error = rung.error(size)
    yield (
        f"standard error of {'one reading' if size == 1 else f'a mean of {size}'}: "
        f"{error:.4g}{unit}" + (" = √(sigma_between² + sigma²/n)" if size > 1 else "")
    )
    match rung.detector.scheme:
        case CusumPlan() as s:
            name, sign = rung.statistic["name"].replace("_", " "), "−" if rung.sign < 0 else ""
            yield (
                f"z = (mean − {rung.baseline.mean:.12g}) / standard error; the {name} adds "
                f"{sign}z − {s.k:.6g} and never falls below 0; it signals above h = {s.h:.6g}, "
                f"which is {s.h * error:.4g}{unit}"
                + (
                    ""
                    if s.hold
                    else f"; after a signal it starts again at {s.head_start * s.h:.4g}"
                )
            )
        case EwmaPlan() as s:
            yield (
                f"average ← {s.lam:.6g} · mean + {1 - s.lam:.6g} · average before; its variance "
                f"V ← {s.lam:.6g}² · SE² + {1 - s.lam:.6g}² · V"
                + (" in the long run" if s.asymptotic else "")
                + f"; limits {rung.baseline.mean:.12g} ± {s.width:.6g} · √V"
            )
        case ShewhartPlan():
            pass
    if working.carried is not None:
        yield f"before the first of these it was {working.carried:.4g}{unit} already"


def _of_squares(told: Explanation, rung: Rung) -> Iterator[str]:
    unit = _unit(units.of_chart("variance", told.plan.unit))
    usual, scheme = rung.baseline.sigma**2, rung.detector.scheme
    yield f"usual variance: {usual:.4g}{unit} = sigma²"
    if not isinstance(scheme, CusumPlan):
        return
    k, h = rung.summed()
    adds = f"variance / usual − {k:.6g}" if rung.sign > 0 else f"{k:.6g} − variance / usual"
    size = scheme.size or rung.subgroup["size"]
    yield (
        f"the {rung.statistic['name'].replace('_', ' ')} adds {adds} (times (n − 1)/{size - 1} "
        f"where n is not {size}) and never falls below 0; it signals above h = {h:.6g}, which "
        f"is {h * usual:.4g}{unit}"
        + (
            ""
            if scheme.hold
            else f"; after a signal it starts again at {scheme.head_start * h:.4g}"
        )
    )


def _it_rang(working: Working, rung: Rung, unit: str) -> Iterator[str]:
    rang, said, counted = working.rang, rung.statistic, sum(s.counts for s in working.steps)
    scheme = rung.detector.scheme
    unit = _unit(units.of_chart(scheme.chart, unit))
    limit = said["lower"] if rung.sign < 0 and said["lower"] is not None else said["upper"]
    held = f"{said['value']!r}{unit}"
    against = held if limit is None else f"{held}, limit {limit!r}{unit}"
    subgroups = f"{counted} subgroup{'s'[: counted > 1]}"
    match scheme:
        case CusumPlan() if not rang.terms:
            yield f"when the sum was {against}"
        case CusumPlan():
            yield f"when the sum, over {subgroups} since it last was 0 or started, was {against}"
        case EwmaPlan():
            yield f"when the average, {subgroups} past the centre, was {against}"
        case ShewhartPlan():
            yield _met(rule_of(rung), charted(scheme.chart), counted, held, against)
    if len(rang.readings) > 1:
        yield f"the readings of that subgroup: {', '.join(f'{x:.12g}' for x in rang.readings)}"


def _met(rule: RulePlan | None, name: str, counted: int, held: str, against: str) -> str:
    if rule is None or rule.rule == "outside":
        return f"when the {name} was {against}"
    if rule.rule == "zone":
        return f"when {counted} of the last {rule.of} {name}s lay beyond: the newest {against}"
    return f"when {rule.length} {name}s in a row met the rule: the newest {held}"


def _began(event: AlertEvent) -> Iterator[str]:
    shift = event["shift"]
    if shift is None:
        return
    earliest = shift["onset_from"]
    yield f"most likely at {_moment(shift['onset'])}"
    if earliest is None:
        yield f"nine times in ten before {_moment(shift['onset_to'])}; how long before is not known"
    else:
        yield f"nine times in ten between {_moment(earliest)} and {_moment(shift['onset_to'])}"
    yield (
        f"the mean moved by about {shift['estimate']:.3g}{_unit(shift['unit'])}; "
        "such an estimate runs some 12 % high"
    )


def _chance(plan: CharacteristicPlan, detector: DetectorPlan) -> str:
    ringing = false_alarms.of_detector(plan, detector).whole
    if ringing.subgroups is None:
        return "how often it rings with nothing wrong is too much to compute"
    if math.isinf(ringing.subgroups):
        return "with nothing wrong it never rings"
    once = spans.once_among(ringing.subgroups, "subgroups")
    if ringing.seconds is not None:
        coming = pace.pace(plan)
        each = "each" if coming is not None and coming.each else "any"
        where = f" in {each} stream" if pace.keys(plan) else ""
        once = spans.once(ringing.seconds, where, ringing.subgroups, "subgroups")
    return (
        f"with nothing wrong {detector.name} rings {once}, by the textbook; "
        "most real lines ring more often"
    )


def _moment(text: str) -> str:
    return f"{text[:10]} {text[11:].removesuffix('Z')} UTC"


def _unit(unit: str) -> str:
    return f"{_BOUND}{unit}" if unit else ""
