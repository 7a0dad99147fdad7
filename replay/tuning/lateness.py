"""Which drifts are put in, and how late every batch of settings catches them.

Knows drifts, batches and curves. Must not know false alarms, ranks or words.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.plan import CharacteristicPlan, Scheme
from replay.tuning.batches import Batch
from replay.tuning.candidates import Request
from replay.tuning.catching import JOINTLY, Catcher, moments
from replay.tuning.changed import Drift, resolution
from replay.tuning.delays import Resampling
from replay.tuning.drifts import FEWEST, Onsets, onsets
from replay.tuning.preparing import Held, Prepared, horizon
from replay.tuning.result import Delay, Shape

RAMP = 200
"""Readings of a stream over which a ramp grows."""

_CURVE = (0.5, 0.75, 1.0, 1.25, 1.5, 2.0, 3.0)
"""Sizes of steps that curves are drawn through, times the drift to catch."""


@dataclass(frozen=True, slots=True)
class Drifts:
    """Where drifts begin, what of the gauge they must respect, and why no delay is told by them;
    empty where one is."""

    begun: Onsets
    too_few: str
    resampling: Resampling
    step: float | None
    plausible: tuple[float, float]

    def of(self, shape: Shape, amount: float) -> Drift:
        return Drift(shape, amount, RAMP, self.step, self.plausible)


def put_in(plan: CharacteristicPlan, prepared: Prepared, request: Request) -> Drifts:
    grouped = prepared.held[0].ours
    rng = np.random.default_rng(request.seed)
    begun = onsets(grouped, horizon(prepared.held, request.catch[0]), rng)
    step = plan.resolution if plan.resolution is not None else resolution(prepared.streams)
    return Drifts(
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


def delays(
    batch: Batch, prepared: Prepared, drifts: Drifts, request: Request
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


def curves(
    chosen: dict[int, tuple[Batch, Scheme]],
    prepared: Prepared,
    drifts: Drifts,
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


def _catcher(batch: Batch, prepared: Prepared, drifts: Drifts) -> Catcher:
    return Catcher(
        batch.grouped, drifts.begun, prepared.running, drifts.resampling, batch.held.textbook
    )
