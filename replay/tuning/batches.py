"""All settings that are tried, judged in batches on the same subgroups.

Knows candidates, how readings are grouped, and threads. Must not know drifts, ranks or words.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial

from monitor.plan import CharacteristicPlan, Scheme
from replay.tuning.candidates import Candidate, Request, candidates, configured
from replay.tuning.grouped import Grouped
from replay.tuning.judging import Judged, family, furthest, judge
from replay.tuning.preparing import Held, Prepared

OnProgress = Callable[[str], None]
"""Told what is being done."""


@dataclass(frozen=True, slots=True)
class Batch:
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


def batches(
    plan: CharacteristicPlan, prepared: Prepared, request: Request, progress: OnProgress
) -> Iterator[Batch]:
    """First those that are worked out, then those that are configured, for each way of grouping."""
    for number, held in enumerate(prepared.held):
        tries: list[tuple[Grouped, list[Candidate]]] = []
        if held.asked:
            textbook = held.textbook
            tried = candidates(
                request, held.ours, textbook.error, textbook.interval, held.found.correlation
            )
            tries.append((held.ours, tried))
        if held.theirs is not None:
            tries.append((held.theirs, configured(plan, request.declared)[0]))
        for grouped, tried in tries:
            progress(f"false alarms of {len(tried)} settings on {held.found.said}")
            families: dict[Scheme, list[Candidate]] = {}
            for candidate in tried:
                families.setdefault(family(candidate), []).append(candidate)
            wildest = furthest(grouped, tried)
            one = partial(judge, grouped, interval=held.interval, wildest=wildest)
            if request.jobs > 1:
                with ThreadPoolExecutor(request.jobs) as pool:
                    done = list(pool.map(one, families.values()))
            else:
                done = [one(members) for members in families.values()]
            judged = [each for members in done for each in members]
            known = {each.candidate.name for each in judged}
            left_out = [each.name for each in tried if each.name not in known]
            yield Batch(number, held, grouped, judged, left_out)
