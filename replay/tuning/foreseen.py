"""What a fragment would do if it stood in the configuration, judged on the recording as well.

Knows a plan that is proposed, and how detectors are judged. Must not know YAML or words.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from monitor.plan import CharacteristicPlan
from replay.tuning import lateness
from replay.tuning.batches import Batch
from replay.tuning.candidates import Request, configured
from replay.tuning.declared import Declared
from replay.tuning.hearing import hear
from replay.tuning.judging import furthest, judge
from replay.tuning.lateness import Drifts
from replay.tuning.preparing import Held, Prepared
from replay.tuning.result import Setting, Together
from replay.tuning.showing import Place, setting
from replay.tuning.together import WITH_IT, together


@dataclass(frozen=True, slots=True)
class Proposed:
    """A characteristic as it would be with the keys of a fragment, and its detectors as declared
    there."""

    plan: CharacteristicPlan
    declared: tuple[Declared, ...]


Propose = Callable[[str], Proposed | None]
"""What the YAML of a fragment stands for; None where ``check`` would refuse it."""


@dataclass(frozen=True, slots=True)
class Foreseen:
    """All detectors of the fragment as the crew would have heard them, and each ``alone``."""

    together: Together
    alone: tuple[Setting, ...]


def foresee(
    proposed: Proposed,
    held: Held,
    number: int,
    prepared: Prepared,
    drifts: Drifts,
    place: Place,
    request: Request,
) -> Foreseen:
    """On the subgroups ``held``, the ``number``-th way of gathering, against the baselines of the
    first part, which are those of the fragment."""
    grouped, found = held.ours, held.found
    tried, unfollowed = configured(proposed.plan, proposed.declared)
    wildest = furthest(grouped, tried)
    judged = [one for each in tried for one in judge(grouped, [each], held.interval, wildest)]
    batch = Batch(number, held, grouped, judged, [])
    delays, jointly = (
        ([[] for _ in judged], [])
        if drifts.too_few
        else lateness.delays(batch, prepared, drifts, request)
    )
    alone = tuple(
        setting(each, grouped, number, found, place, own)
        for each, own in zip(judged, delays, strict=True)
    )
    heard = hear(proposed.plan, grouped)
    return Foreseen(
        together(
            proposed.plan, grouped, heard, alone, unfollowed, jointly, found, number, place, WITH_IT
        ),
        alone,
    )
