"""Constants that were worked out once stay as they were while what is asked stays the same.

Knows two plans. Must not know how constants are worked out: another version may do it a little
better, and an alert of yesterday must still be what it was.
"""

from __future__ import annotations

from dataclasses import replace

from monitor.plan import CharacteristicPlan, DetectorPlan, Judgement, Plan


def pinned(plan: Plan, before: Plan) -> Plan:
    """``plan``, with the constants of ``before`` wherever both ask the same of a detector."""
    known = {each.name: each for each in before.characteristics}
    return Plan(
        tuple(
            _characteristic(each, known[each.name]) if each.name in known else each
            for each in plan.characteristics
        )
    )


def _characteristic(new: CharacteristicPlan, old: CharacteristicPlan) -> CharacteristicPlan:
    return replace(
        new,
        judgement=new.judgement and pinned_judgement(new.judgement, old.judgement),
        by_stream={
            stream: pinned_judgement(own, old.judgement_of(stream))
            for stream, own in new.by_stream.items()
        },
    )


def pinned_judgement(new: Judgement, old: Judgement | None) -> Judgement:
    """``new``, with the constants of ``old`` wherever both ask the same of a detector."""
    if old is None:
        return new
    known = {each.revision: each for each in old.detectors if each.intent is not None}
    return Judgement(
        new.baseline, tuple(_detector(each, known.get(each.revision)) for each in new.detectors)
    )


def _detector(new: DetectorPlan, old: DetectorPlan | None) -> DetectorPlan:
    """A revision holds all that is declared, and the intent what others leave to it."""
    if old is None or old.intent != new.intent:
        return new
    return replace(new, scheme=old.scheme)
