"""What is refused where the mean of a stream moved and stayed away, or a gauge stood still.

Knows moves and standstills that were found. Must not know how, or any setting.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.baselining import moving
from monitor.baselining.moving import Moved
from monitor.baselining.reason import second, second_after
from monitor.baselining.stuck import Stuck
from monitor.baselining.upset_reasons import stood_still
from replay.tuning.result import Refusal


def of_moved(moved: Sequence[Moved], unit: str) -> Refusal:
    """No interval where a stream moved."""
    return Refusal(
        "any interval, and to recommend any setting",
        f"the centre moved and stayed away: {moving.told(moved, unit)} (the shorter side is "
        f"{100 * moving.widest(moved):.2g} % of the recording)",
        f"find what moved it, and {_label(*moving.shorter_side(moved))}; or record again",
    )


def of_stuck(stuck: Sequence[Stuck]) -> Refusal:
    """No setting where a gauge stood still."""
    most = stuck[0]
    return Refusal(
        "to recommend any setting" if most.much else "to trust what was read while it was stuck",
        stood_still(stuck),
        f"look at the gauge, and {_label(most.first, most.last)}",
    )


def _label(begin: int, end: int) -> str:
    return f"label it with --events: a cause from {second(begin)} until {second_after(end)}"
