"""What a process does that a baseline cannot describe, or must allow for, and what to do about it.

Knows what to demand of a process (methods, "What breaks textbook promises in line"). Must not know
how figures were worked out.
"""

from __future__ import annotations

from collections.abc import Iterator

from monitor.baselining import moving, upset_reasons
from monitor.baselining.delivered import Delivered
from monitor.baselining.estimating import Estimate
from monitor.baselining.material import Clues
from monitor.baselining.reason import Reason, part
from monitor.methods.f_ratio import f_cdf, f_sf
from monitor.methods.swings import LEAST

MIXED = 0.02
"""Of the variance, between sources that take turns, from which on a stream is refused as mixed."""
_STRATIFIED, _THINLY = 0.75, 0.9
_SURE, _RARE = 1e-6, 1e-3
_MORE = 1.1
"""Of the variance of means that readings explain, from which on it is worth a word."""
_COSTLY = 0.5


def wander(estimate: Estimate, unit: str) -> Iterator[Reason]:
    """Does the centre stay?"""
    found = estimate.wander
    if estimate.stayed and (found is None or not found.wanders):
        yield upset_reasons.moved(estimate.moved, unit)
    elif found is None:
        yield Reason(
            "provisional",
            "wander-unseen",
            f"whether the centre stays cannot be seen: that takes a stream of {LEAST} subgroups "
            "or more",
            "estimate again from a longer recording",
        )
    elif found.may_wander:
        if found.by == "stretches":
            slow = (
                f"means of {found.long} subgroups vary {found.growth:.2g} times as much as means "
                f"of {found.short} foretell"
            )
        else:
            slow = (
                f"swings over {found.long} subgroups or more are {found.growth:.2g} times as "
                f"strong as those over {found.short} to {found.long} foretell"
            )
        so = (
            "the centre does not stay"
            if found.wanders
            else "the centre may not stay, though the recording is too short to be sure"
        )
        then = ", so no frozen centre describes this process" if found.wanders else ""
        without = ""
        if estimate.stayed:
            without = f" ({upset_reasons.leave_out(*moving.shorter_side(estimate.moved))})"
        yield Reason(
            "refuse" if found.wanders else "provisional",
            "wander",
            f"{so} (it wanders): {slow}{then}{_where(estimate, unit)}",
            "find what moves it (a warm-up, a change of material, an adjustment, one step in "
            f"the middle) and record again without it{without}; if it always moves so and that "
            "does no harm, gather longer subgroups, or write ignore: with what is harmless",
        )


def _where(estimate: Estimate, unit: str) -> str:
    if not estimate.moved:
        return ""
    return f". Cut in two, it moved most so: {moving.told(estimate.moved, unit)}"


def mixed(estimate: Estimate, clues: Clues) -> Iterator[Reason]:
    """Do several sources share a stream?"""
    cycle = clues.cycle
    if cycle is not None and cycle.share > MIXED:
        yield Reason(
            "refuse",
            "mixed",
            f"readings {cycle.length} apart are alike and those between are not "
            f"({cycle.share:.0%} of the variance): {cycle.length} sources that differ, such as "
            "heads or cavities, take turns in one stream, and one that drifts would hide",
            "give each a stream of its own: write its key under source.stream, or use a topic "
            "for each",
        )
        return
    several = [each for each in estimate.each if each.components is not None]
    # The chance of subgroup means so much alike, in the stream where they are most so.
    for each in several:
        parts = each.components
        assert parts is not None
        chance = f_cdf(parts.ratio, parts.between_freedom, parts.within_freedom)
        if chance * len(several) < _SURE and parts.ratio < _THINLY:
            yield Reason(
                "refuse" if parts.ratio < _STRATIFIED else "provisional",
                "stratified",
                f"subgroup means vary less ({parts.ratio:.2f} times) than their readings "
                "explain, as where sources that differ are mixed in every subgroup",
                "give each head, lane or cavity a stream of its own, or look for what orders "
                "the readings",
            )
            break


def following(estimate: Estimate, delivered: Delivered | None) -> Iterator[Reason]:
    """Do successive means follow each other?"""
    if not estimate.follows:
        return
    left = 1.0 if delivered is None else delivered.of_following
    cost = "" if delivered is None else f", which leaves {part(left)} of the promise"
    yield Reason(
        "provisional" if left < _COSTLY else "note",
        "following",
        f"successive means follow each other (correlation {estimate.correlation:.2f}, long "
        f"means vary {estimate.inflation:.2g} times as much as independent ones){cost}",
        "gather subgroups farther apart (every:) or longer, or let `driftbell-replay tune` "
        "find constants that keep the promise on this recording",
    )


def between(estimate: Estimate) -> Iterator[Reason]:
    """Does something act between subgroups?"""
    parts = [each.components for each in estimate.each if each.components is not None]
    freedom = sum(each.between_freedom for each in parts)
    within_freedom = sum(each.within_freedom for each in parts)
    if not freedom or not within_freedom:
        return
    means = sum(each.between * each.between_freedom for each in parts) / freedom
    within = sum(each.within * each.within_freedom for each in parts) / within_freedom
    ratio = means / within
    more = ratio > _MORE and f_sf(ratio, freedom, within_freedom) < _RARE
    if more and any(each.values.sigma_between > 0 for each in estimate.each):
        yield Reason(
            "note",
            "between",
            f"subgroup means vary more than their readings explain (F {ratio:.3g}): something "
            "acts between subgroups, and the baseline allows for it as sigma_between",
            "nothing, if that variation is the usual and harmless one",
        )


def heads(estimate: Estimate) -> Iterator[Reason]:
    """Do streams differ?"""
    if len(estimate.each) < 2:
        return
    heads = estimate.heads
    share = "" if heads is None else f" ({heads.share:.0%} of the variance of means)"
    if estimate.differ:
        yield Reason(
            "note",
            "streams-differ",
            f"the streams differ in centre{share} or spread, so each has a baseline of its own",
            "nothing here; but differences between heads that should be alike can be set right",
        )
    else:
        yield Reason(
            "note",
            "streams-alike",
            "the streams do not differ more than chance explains, so they have one baseline",
            "nothing",
        )
