"""What a fragment replaces, keeps and leaves out, in sentences.

Knows plain words. Must not know how a setting was found, or the configuration's form.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from monitor.configuration import spans
from monitor.plan import CharacteristicPlan
from replay.tuning.candidates import AS_CONFIGURED, Request
from replay.tuning.declared import Declared
from replay.tuning.foreseen import Foreseen
from replay.tuning.preparing import Held
from replay.tuning.ranking import keeps
from replay.tuning.replacing import SEVERAL, Settled
from replay.tuning.result import Setting, Together


def unchanged(
    characteristic: str,
    best: Setting,
    spread: Setting | None,
    settings: Sequence[Setting],
    now: Together | None,
    request: Request,
) -> Iterator[str]:
    """Where what stands there does best; all ``settings`` as in :func:`noted`, and what they do
    together ``now``."""
    yield from _too_often(request.declared, settings, settings, "As configured it rang")
    name = best.name.removeprefix(AS_CONFIGURED)
    also = (
        "" if spread is None else f", and {spread.name.removeprefix(AS_CONFIGURED)} for the spread"
    )
    yield (
        f"Nothing need change: {name}, as it stands in {characteristic} with its baseline, does "
        f"best{also}. These are the detectors that stand there."
    )
    if now is not None and not now.meets:
        rang = f"{now.observed.alarms:,} time{'' if now.observed.alarms == 1 else 's'}"
        yield (
            f"Whether all of them together keep the promise is another matter: they rang {rang} in "
            f"the last {spans.long(now.observed.seconds)} of time without an alert, and "
            f"{'that is too often' if keeps(now) == 'no' else 'the recording leaves it open'}."
        )
    promised = request.promised
    if promised is not None and promised != request.promise:
        yield (
            f"The promise of one false alarm in {spans.long(promised)} stays too, and with it the "
            f"limits worked out from it; they were judged by the {spans.long(request.promise)} "
            "asked here."
        )


def noted(
    plan: CharacteristicPlan,
    settled: Settled,
    settings: Sequence[Setting],
    foreseen: Foreseen | None,
    held: Held,
    request: Request,
    promises: bool,
) -> Iterator[str]:
    """What the fragment replaces, keeps and leaves out, the gravest first; whether it ``promises``
    anything. ``foreseen`` says what those that are kept would do, all ``settings`` what might be
    put in their place."""
    kept = settled.kept
    if foreseen is not None:
        rings = "With this baseline it would have rung"
        yield from _too_often(kept, foreseen.alone, settings, rings)
        yield from _all_of_it(foreseen.together)
    else:
        yield "Caution: driftbell check refuses these keys as they stand; it says why."
    names = " and ".join(each.setting.name for each in settled.new)
    keys = "subgroup, baseline, promise" if promises else "subgroup, baseline"
    yield (
        f"{names}, held against centre and spread of the first part of the recording. These keys "
        f"take the place of {keys} and detectors in {plan.name}; every other key stays."
    )
    replaced = [one for each in settled.new for one in each.replaces]
    it = "It" if len(settled.new) == 1 else "They"
    ends = "s" if len(settled.new) == 1 else ""
    said = f"{it} replace{ends} {_listed(replaced)}" if replaced else f"{it} replace{ends} none"
    yield said + (f" and keep{ends} {_listed(kept)}." if kept else ".")
    yield from _promised(settled, request, promises)
    yield from _of_spread(settled, request)
    for each in settled.unfit:
        needs = "two readings or more" if each.keys["chart"] in SEVERAL else "single readings"
        yield (
            f"{each.name} is left out: a chart of {each.chart.replace('_', ' ')} needs {needs} in "
            f"a subgroup, and these are {held.found.said}."
        )
    if held.plan != plan.subgroup:
        fixed = [e for e in kept if e.chart == "variance" and e.kind == "cusum" and "h" in e.keys]
        if fixed:
            yield (
                f"The constants of {_listed(fixed)} were written for other subgroups: work them "
                "out again, or write catch_ratio."
            )
    yield (
        "The baseline replaces whatever stands there, a file: or learn: too, since the constants "
        "were fitted to these values."
    )
    count = len(held.found.baselines)
    if count > 1 or held.found.baselines[0].stream:
        expected = plan.source.expected_streams or 0
        more = f" ({expected:,} are expected)" if expected > count else ""
        yield (
            f"The recording holds {count:,} stream{'s' if count > 1 else ''}; any other{more} is "
            "held against the values of all together. Where others bring more readings, it rings "
            "more often in proportion."
        )


def breaking(kept: Sequence[Declared], alone: Sequence[Setting]) -> list[Setting]:
    """Those of ``alone`` that are ``kept`` and break their part of the promise on this very
    recording, whatever the textbook says of them."""
    judged = {each.name: each for each in alone if each.origin == "configured"}
    found = [judged.get(f"{AS_CONFIGURED}{each.name}") for each in kept]
    return [each for each in found if each is not None and keeps(each) == "no"]


def names(found: Sequence[Setting]) -> tuple[str, ...]:
    """What the detectors are called in the configuration."""
    return tuple(each.name.removeprefix(AS_CONFIGURED) for each in found)


def _too_often(
    kept: Sequence[Declared], alone: Sequence[Setting], settings: Sequence[Setting], rings: str
) -> Iterator[str]:
    for each in breaking(kept, alone):
        alarms, asked = each.observed.alarms, spans.long(each.asked)
        yield (
            f"Caution: {each.name.removeprefix(AS_CONFIGURED)} stays, and does not keep its part "
            f"of the promise. {rings} {alarms:,} time{'' if alarms == 1 else 's'} in "
            f"the last {spans.long(each.observed.seconds)} with nothing wrong, where one in "
            f"{asked} was asked of it. {_instead(each, settings)}"
        )


def _all_of_it(together: Together) -> Iterator[str]:
    if keeps(together) == "no":
        alarms = together.observed.alarms
        yield (
            f"Caution: all of it together would have rung {alarms:,} "
            f"time{'' if alarms == 1 else 's'} in the last "
            f"{spans.long(together.observed.seconds)} with nothing wrong, where one in "
            f"{spans.long(together.asked)} was asked."
        )


def _instead(found: Setting, settings: Sequence[Setting]) -> str:
    able = (
        each
        for each in settings
        if each.meets
        and each.origin != "configured"
        and each.grouping == found.grouping
        and (each.kind, each.chart) == (found.kind, found.chart)
    )
    other = next(able, None)
    if other is None:
        return "Nothing here is shown to do better: take it out, or bear with what it rings."
    constants = ", ".join(f"{key}: {value:g}" for key, value in other.constants)
    return f"Write {constants} for it, which is shown to keep it, or take it out."


def _promised(settled: Settled, request: Request, promises: bool) -> Iterator[str]:
    """One promise for all that is written: who keeps which part of it, and who keeps none."""
    asked = spans.long(request.promise)
    if promises and request.promised is not None:
        was = request.promised != request.promise
        instead = f" instead of {spans.long(request.promised)}" if was else ""
        yield f"The promise is one false alarm in {asked}{instead}, of all detectors together."
    fitted = [
        f"{each.setting.name} to one in {spans.long(each.setting.asked)}"
        for each in settled.new
        if each.setting.origin == "calibrated" and each.setting.asked != request.promise
    ]
    if fitted:
        yield f"Fitted to its part of the {asked}: {'; '.join(fitted)}."
    by_promise = [each for each in settled.kept if each.by_promise]
    if by_promise and promises:
        yield (
            f"The limits of {_listed(by_promise)} are worked out from what the promise leaves them."
        )
    written = [each for each in settled.kept if not each.by_promise]
    if written:
        yield (
            f"{_listed(written)} keep{'s' if len(written) == 1 else ''} the constants written "
            "down, and may ring more often than that: driftbell check says how often all of them "
            "ring together."
        )


def _of_spread(settled: Settled, request: Request) -> Iterator[str]:
    spread = next((each.setting for each in settled.new if each.setting.of_spread), None)
    if spread is None and request.spread and "cusum" in request.kinds:
        yield (
            "No detector of the spread is shown to keep its part of the promise on these subgroups."
        )
    elif spread is not None and spread.rank != 1:
        yield (
            f"{spread.name} is not the first for the spread: those before it take other subgroups, "
            "or are held against the baseline that goes."
        )


def _listed(found: Sequence[Declared]) -> str:
    *most, last = (each.name for each in found)
    return f"{', '.join(most)} and {last}" if most else last
