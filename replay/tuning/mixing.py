"""Whether sources that differ take turns in one stream: a drift of one then hides among the rest.

Knows readings in their order. Must not know subgroups or settings.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.baselining.process_reasons import MIXED
from monitor.methods.cycles import Cycle, cycle
from replay.readings import StreamReadings


def mixed(streams: Sequence[StreamReadings]) -> Cycle | None:
    """The cycle in which they take turns, where ``driftbell-replay baseline`` refuses it too; None
    where there is none."""
    found = cycle([each.value for each in streams])
    return found if found is not None and found.share > MIXED else None
