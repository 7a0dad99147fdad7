"""The whole of ``tune``: from the readings of one characteristic to its result.

Knows the order of the steps. Must not know how any of them is done, or how a result is shown.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

from monitor import stream_names
from monitor.plan import Scheme
from replay.readings import Readings
from replay.tuning import batches, fragment, fragment_notes, lateness, looking, verdict
from replay.tuning.batches import Batch, OnProgress
from replay.tuning.candidates import Request, configured
from replay.tuning.catching import JOINTLY
from replay.tuning.foreseen import Propose, foresee
from replay.tuning.fragment_notes import names, noted, unchanged
from replay.tuning.hearing import hear
from replay.tuning.mixing import mixed
from replay.tuning.preparing import prepare
from replay.tuning.ranking import ranked, to_take
from replay.tuning.result import Refusal, Result, Setting, Source, Together
from replay.tuning.showing import Place, setting
from replay.tuning.together import together

_CURVED = 5
"""So many of the best settings for the mean get a curve, and every configured one."""


def study(
    readings: Readings,
    sources: Sequence[Source],
    request: Request,
    progress: OnProgress,
    propose: Propose,
) -> Result:
    """Judge every setting that ``request`` asks for, and what comes of the best if it is put in, as
    ``propose`` reads it. Raises CommandError where there is nothing to judge."""
    plan = readings.plan
    progress("looking at the recording")
    prepared = prepare(plan, readings.streams, request)
    drifts = lateness.put_in(plan, prepared, request)
    place = Place(
        prepared.running,
        request.labels,
        tuple(stream_names.name(each.stream) for each in prepared.streams),
        request.promise,
    )
    all_batches = list(batches.batches(plan, prepared, request, progress))
    settings: list[Setting] = []
    schemes: list[tuple[Batch, Scheme]] = []
    running_now: Together | None = None
    unmatched = configured(plan, request.declared)[1]
    for batch in all_batches:
        progress(f"drifts for {len(batch.judged)} settings on {batch.held.found.said}")
        found = batch.held.found
        delays, jointly = (
            ([[] for _ in batch.judged], [])
            if drifts.too_few
            else lateness.delays(batch, prepared, drifts, request)
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
    curves = lateness.curves(chosen, prepared, drifts, request)
    if running_now is not None:
        running_now = replace(running_now, curve=curves.get(JOINTLY, ()))
    final = tuple(replace(each, curve=curves.get(index, ())) for index, each in order)
    among = mixed(prepared.streams)
    stuck = prepared.stuck
    may_take = among is None and not (stuck and stuck[0].much)
    best, best_spread = to_take(final) if may_take else (None, None)
    running = prepared.running
    groupings = tuple(each.found for each in prepared.held)
    left_out = [name for batch in all_batches for name in batch.left_out]
    refusals = [
        *prepared.refusals,
        *verdict.refusals(
            groupings,
            final,
            request.promise,
            running.whole,
            left_out,
            unmatched,
            among,
            stuck,
            plan.unit,
        ),
    ]
    if drifts.too_few:
        more = verdict.longer(request.promise, running.whole)
        refusals.append(Refusal("how late any drift is caught", drifts.too_few, more))
    trust = verdict.trust(groupings, final, running.whole, among, stuck, plan.unit)
    written, foreseen = None, None
    notes: Iterable[str] = ()
    breaking: tuple[str, ...] = ()
    if best is not None:
        number = final[best].grouping
        held = prepared.held[number]
        spread = None if best_spread is None else final[best_spread]
        written = fragment.fragment(plan, final[best], spread, held, request)
        if written.settled is None:
            notes = unchanged(plan.name, final[best], spread, final, running_now, request)
            breaking = names(fragment_notes.breaking(request.declared, final))
        else:
            progress("all of the fragment together")
            proposed = propose(written.text)
            if proposed is not None:
                foreseen = foresee(proposed, held, number, prepared, drifts, place, request)
                kept = fragment_notes.breaking(written.settled.kept, foreseen.alone)
                breaking = names(kept)
            notes = noted(plan, written.settled, final, foreseen, held, request, written.promises)
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
        ramp=lateness.RAMP,
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
        proposed=None if foreseen is None else foreseen.together,
        fragment="" if written is None else written.text,
        notes=tuple(notes),
        breaking=breaking,
        events=len(request.labels),
    )
