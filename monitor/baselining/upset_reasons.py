"""What happened once in a recording and spoils it: the centre moved, or a gauge stood still.

Knows moves and standstills that were found, and what to do about them. Must not know how they were
found.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from monitor import stream_names
from monitor.baselining import moving
from monitor.baselining.moving import Moved
from monitor.baselining.reason import Reason, second, second_after
from monitor.baselining.stuck import Stuck


def moved(found: Sequence[Moved], unit: str) -> Reason:
    """The centre moved, and stayed away."""
    widest = moving.widest(found)
    return Reason(
        "provisional" if widest < moving.BRIEF else "refuse",
        "moved",
        f"the centre moved and stayed away: {moving.told(found, unit)} (the shorter side is "
        f"{100 * widest:.2g} % of the recording), so one centre does not describe both sides",
        "find what moved it and estimate again without it (driftbell-replay baseline with "
        f"{leave_out(*moving.shorter_side(found))}), or record again",
    )


def stuck(found: Sequence[Stuck]) -> Iterator[Reason]:
    """Did a gauge stand still?"""
    if found:
        most = found[0]
        yield Reason(
            "refuse" if most.much else "provisional",
            "stuck",
            f"{stood_still(found)}, far more than chance makes of its steps",
            "look at the gauge, and estimate again without it (driftbell-replay baseline with "
            f"{leave_out(most.first, most.last)})",
        )


def stood_still(found: Sequence[Stuck]) -> str:
    """Which gauge did so most, for how long and when."""
    most = found[0]
    whose = f" of {stream_names.name(most.stream)}" if most.stream else ""
    runs = "" if most.runs == 1 else f", the longest of {most.runs} such runs"
    others = len(found) - 1
    also = f"; so did that of {moving.more_streams(others)}" if others else ""
    return (
        f"the gauge{whose} stood still: {most.readings:,} readings in a row are identical, from "
        f"{second(most.first)} to {second_after(most.last)}{runs} ({100 * most.share:.2g} % of "
        f"its readings){also}"
    )


def leave_out(begin: int, end: int) -> str:
    """The option that leaves out a span of instants (µs)."""
    return f"--leave-out {second(begin)}/{second_after(end)}"
