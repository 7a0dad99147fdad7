"""What a baseline is estimated from: subgroups of each stream, and what only readings can show.

Knows plain arrays, so few of them that a daemon can gather them as it goes. Must not know where
they come from.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.baselining.stuck import Stuck
from monitor.methods.cycles import Cycle
from monitor.methods.normal import Array
from monitor.plan import Stream

Flags = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class StreamSubgroups:
    """The subgroups of one stream, in order; arrays of one length.

    ``time``: event time of the last reading (µs). ``n``: readings. ``mean``, ``variance`` (divisor
    n − 1) and ``range`` in the gauge's unit; the last two are nan for a single reading.
    ``broken``: whether a gap or a restart of the gauge lies before it.
    """

    stream: Stream
    time: NDArray[np.int64]
    n: NDArray[np.int64]
    mean: Array
    variance: Array
    range: Array
    broken: Flags

    def __len__(self) -> int:
        return len(self.n)

    def keeping(self, kept: Flags) -> StreamSubgroups:
        """Those alone; what follows one that is left out does not continue what was before."""
        after = np.append(True, ~kept[:-1]) if len(kept) else kept
        return StreamSubgroups(
            self.stream,
            self.time[kept],
            self.n[kept],
            self.mean[kept],
            self.variance[kept],
            self.range[kept],
            (self.broken | after)[kept],
        )


@dataclass(frozen=True, slots=True)
class Clues:
    """What readings show and subgroups do not: the gauge's smallest ``step`` (its unit), a
    ``cycle`` of sources that take turns within a stream, and streams whose gauge was ``stuck``;
    None where there is none, or nobody looked."""

    step: float | None = None
    cycle: Cycle | None = None
    stuck: tuple[Stuck, ...] = ()
