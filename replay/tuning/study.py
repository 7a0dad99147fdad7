"""The whole of ``tune``: from the readings of one characteristic to its result.

Knows the order of the steps. Must not know how any of them is done, or how a result is shown.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from monitor import stream_names
from monitor.plan import CharacteristicPlan, Scheme
from replay.readings import Readings
from replay.tuning import fragment, looking, verdict
from replay.tuning.candidates import Candidate, Request, candidates, configured
from replay.tuning.catching import JOINTLY, Catcher, moments
from replay.tuning.changed import Drift, resolution
from replay.tuning.delays import Resampling
from replay.tuning.drifts import FEWEST, Onsets, onsets
from replay.tuning.grouped import Grouped
from replay.tuning.hearing import hear
from replay.tuning.judging import Judged, family, judge
from replay.tuning.preparing import Held, Prepared, horizon, prepare
from replay.tuning.ranking import ranked, to_take
from replay.tuning.result import Delay, Refusal, Result, Setting, Shape, Source, Together
from replay.tuning.showing import Place, setting
from replay.tuning.together import together

OnProgress = Callable[[str], None]
"""Told what is being done."""

RAMP = 200
"""Readings of a stream over which a ramp grows."""

_CURVE = (0.5, 0.75, 1.0, 1.25, 1.5, 2.0, 3.0)
"""Sizes of steps that curves are drawn through, times the drift to catch."""

_CURVED = 5
"""So many of the best settings for the mean get a curve, and every configured one."""


@dataclass(frozen=True, slots=True)
class _Drifts:
    """Where drifts begin, what of the gauge they must respect, and why no delay is told by them;
    empty where one is."""

    begun: Onsets
    too_few: str
    resampling: Resampling
    step: float | None
    plausible: tuple[float, float]

    def of(self, shape: Shape, amount: float) -> Drift:
        return Drift(shape, amount, RAMP, self.step, self.plausible)


@dataclass(frozen=True, slots=True)
class _Batch:
    """Settings judged together: on the same subgroups, against the same baselines."""

    number: int
    held: Held
    grouped: Grouped
    judged: list[Judged]
    left_out: list[str]

    @property
    def configured(self) -> tuple[int, ...]:
        """The places of the configured detectors among ``judged``."""
        return tuple(
            place for place, each in enumerate(self.judged) if each.candidate.origin == "configured"
        )


def study(
    readings: Readings, sources: Sequence[Source], request: Request, progress: OnProgress
) -> Result:
    """Judge every setting that ``request`` asks for. Raises CommandError where there is nothing to
    judge."""
    plan = readings.plan
    progress("looking at the recording")
    prepared = prepare(plan, readings.streams, request)
    drifts = _drifts(plan, prepared, request)
    place = Place(
        prepared.running,
        request.labels,
        tuple(stream_names.name(each.stream) for each in prepared.streams),
        request.promise,
    )
    batches = list(_batches(plan, prepared, request, progress))
    settings: list[Setting] = []
    schemes: list[tuple[_Batch, Scheme]] = []
    running_now: Together | None = None
    unmatched = configured(plan, request.declared)[1]
    for batch in batches:
        progress(f"drifts for {len(batch.judged)} settings on {batch.held.found.said}")
        found = batch.held.found
        delays, jointly = (
            ([[] for _ in batch.judged], [])
            if drifts.too_few
            else _delays(batch, prepared, drifts, request)
        )
        for judged, own in zip(batch.judged, delays, strict=True):
            settings.append(setting(judged, batch.grouped, batch.number, found, place, own))
            schemes.append((batch, judged.scheme))
        if batch.grouped is batch.held.theirs:
            progress("alerts of all configured detectors together")
            alone = settings[len(settings) - len(batch.judged) :]
            heard = hear(plan, batch.grouped)
            running_now = together(
                plan, batch.grouped, heard, alone, unmatched, jointly, found, batch.number, place
            )
    order = ranked(settings, request.catch[0])
    progress("drifts of several sizes for the best")
    best_first = [index for index, each in order if not each.of_spread][:_CURVED]
    curved = dict.fromkeys(
        best_first + [index for index, each in order if each.origin == "configured"]
    )
    chosen = {} if drifts.too_few else {index: schemes[index] for index in curved}
    curves = _curves(chosen, prepared, drifts, request)
    if running_now is not None:
        running_now = replace(running_now, curve=curves.get(JOINTLY, ()))
    final = tuple(replace(each, curve=curves.get(index, ())) for index, each in order)
    best, best_spread = to_take(final)
    running = prepared.running
    groupings = tuple(each.found for each in prepared.held)
    left_out = [name for batch in batches for name in batch.left_out]
    refusals = [
        *prepared.refusals,
        *verdict.refusals(groupings, final, request.promise, running.whole, left_out, unmatched),
    ]
    if drifts.too_few:
        more = verdict.longer(request.promise, running.whole)
        refusals.append(Refusal("how late any drift is caught", drifts.too_few, more))
    trust = verdict.trust(groupings, final, running.whole)
    written = None
    if best is not None:
        held = prepared.held[final[best].grouping]
        spread = None if best_spread is None else final[best_spread]
        written = fragment.fragment(plan, final[best], spread, held, request)
    return Result(
        characteristic=plan.name,
        title=plan.title,
        unit=plan.unit,
        sources=tuple(sources),
        seed=request.seed,
        promise=request.promise,
        catch=request.catch,
        ignore=request.ignore,
        ratio=request.ratio,
        ramp=RAMP,
        resolution=drifts.step,
        whole=looking.part(prepared.streams, running, running.first, running.last),
        fit=looking.part(prepared.streams, running, running.first, prepared.fit_to),
        proof=looking.part(prepared.streams, running, prepared.prove_from, running.last),
        set_aside=tuple(sorted(readings.set_aside.items())),
        streams=looking.streams(prepared.streams),
        groupings=groupings,
        settings=final,
        refusals=tuple(refusals),
        trust=trust.said,
        trusted=trust.trusted,
        with_care=trust.with_care,
        best=best,
        best_spread=best_spread,
        together=running_now,
        fragment="" if written is None else written.text,
        notes=() if written is None else written.notes,
        events=len(request.labels),
    )


def _drifts(plan: CharacteristicPlan, prepared: Prepared, request: Request) -> _Drifts:
    grouped = prepared.held[0].ours
    rng = np.random.default_rng(request.seed)
    begun = onsets(grouped, horizon(prepared.held, request.catch[0]), rng)
    step = plan.resolution if plan.resolution is not None else resolution(prepared.streams)
    return _Drifts(
        begun,
        _too_few(begun, prepared.held[0], request.catch[0]),
        Resampling(moments(grouped, begun, prepared.running), rng),
        step,
        (plan.source.plausible_lower, plan.source.plausible_upper),
    )


def _too_few(begun: Onsets, held: Held, catch: float) -> str:
    apart = begun.apart(held.ours)
    if apart < FEWEST:
        return (
            f"the last part has {apart} subgroups for drifts to begin in, and {FEWEST} are needed"
        )
    floor = (held.textbook.floor(catch) or 0.0) * held.textbook.readings
    if begun.horizon < floor:
        return (
            f"drifts can be followed for {begun.horizon} readings, and the best CUSUM takes "
            f"{floor:.0f} on average"
        )
    return ""


def _batches(
    plan: CharacteristicPlan, prepared: Prepared, request: Request, progress: OnProgress
) -> Iterator[_Batch]:
    for number, held in enumerate(prepared.held):
        tries: list[tuple[Grouped, list[Candidate]]] = []
        if held.asked:
            textbook = held.textbook
            tries.append(
                (held.ours, candidates(request, held.ours, textbook.error, textbook.interval))
            )
        if held.theirs is not None:
            tries.append((held.theirs, configured(plan, request.declared)[0]))
        for grouped, tried in tries:
            progress(f"false alarms of {len(tried)} settings on {held.found.said}")
            families: dict[Scheme, list[Candidate]] = {}
            for candidate in tried:
                families.setdefault(family(candidate), []).append(candidate)
            one = partial(judge, grouped, interval=held.interval)
            if request.jobs > 1:
                with ThreadPoolExecutor(request.jobs) as pool:
                    done = list(pool.map(one, families.values()))
            else:
                done = [one(members) for members in families.values()]
            judged = [each for members in done for each in members]
            known = {each.candidate.name for each in judged}
            left_out = [each.name for each in tried if each.name not in known]
            yield _Batch(number, held, grouped, judged, left_out)


def _delays(
    batch: _Batch, prepared: Prepared, drifts: _Drifts, request: Request
) -> tuple[list[list[Delay]], list[Delay]]:
    """Of every setting of the batch: the first drift to catch in all shapes, and its own; and of
    all configured ones together."""
    catcher = _catcher(batch, prepared, drifts)
    catcher.warm({index: one.scheme for index, one in enumerate(batch.judged)})
    everyone = range(len(batch.judged))
    first = request.catch[0]
    found: list[list[Delay]] = [[] for _ in everyone]
    wanted: list[tuple[Drift, Sequence[int]]] = [
        (drifts.of("step", first), everyone),
        (drifts.of("ramp", first), everyone),
        (drifts.of("spread", request.ratio), everyone),
    ]
    for catch in request.catch[1:]:
        own = [i for i in everyone if batch.judged[i].candidate.catch == catch]
        wanted.append((drifts.of("step", catch), own))
    jointly: list[Delay] = []
    for drift, keys in wanted:
        caught = catcher.catch(drift, keys, batch.configured)
        if JOINTLY in caught:
            jointly.append(caught.pop(JOINTLY))
        for key, delay in caught.items():
            found[key].append(delay)
    return found, jointly


def _curves(
    chosen: dict[int, tuple[_Batch, Scheme]],
    prepared: Prepared,
    drifts: _Drifts,
    request: Request,
) -> dict[int, tuple[Delay, ...]]:
    """Of every chosen setting by its place, and of all configured ones together."""
    batches = {id(batch): batch for batch, _ in chosen.values()}
    found: dict[int, list[Delay]] = {index: [] for index in chosen}
    for batch in batches.values():
        catcher = _catcher(batch, prepared, drifts)
        catcher.warm({i: scheme for i, (one, scheme) in chosen.items() if one is batch})
        together_now = [
            i
            for i, (one, _) in chosen.items()
            if one is batch and batch.grouped is batch.held.theirs
        ]
        for share in _CURVE:
            drift = drifts.of("step", share * request.catch[0])
            for index, delay in catcher.catch(drift, tuple(chosen), together_now).items():
                found.setdefault(index, []).append(delay)
    return {index: tuple(delays) for index, delays in found.items()}


def _catcher(batch: _Batch, prepared: Prepared, drifts: _Drifts) -> Catcher:
    return Catcher(
        batch.grouped, drifts.begun, prepared.running, drifts.resampling, batch.held.textbook
    )
