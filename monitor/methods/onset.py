"""When a shift began, and how large it has been since: a change point with its interval.

Knows a series of standardised values. Must not know times, units or which detector signalled.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.methods.normal import Array

LOOK_BACK = 200
"""As many subgroups as an onset is sought in."""

# Before looking, a size of mean 0 and variance 2 is expected. Without that, two or three chance
# outliers just before the signal pass for a large, recent shift.
_PRIOR = 0.5
_DROP, _DROP_PER_SIZE = 3.2, 0.6


@dataclass(frozen=True, slots=True)
class Onset:
    """Indices into the series: ``index`` is the first shifted value, and the shift began somewhere
    from ``first`` to ``last`` with about 90 % confidence; ``first`` is None where it may have begun
    before the series. ``size`` is the mean since ``index``, signed, in standard errors (on average
    too large, by some 5 to 30 %)."""

    index: int
    first: int | None
    last: int
    size: float


def estimate(z: Sequence[float] | Array, direction: int = 0) -> Onset:
    """Onset of the shift that lasts to the end of ``z``, standardised values, the newest last.

    Maximises C(t) = S²/2(m + ½) over the first shifted index t, where S sums the m values from t
    on: the maximum-likelihood change point from a known mean (Samuel, Pignatiello & Calvin 1998),
    its size held by a weak normal prior. The interval spans every t whose C is within
    3.2 − 0.6·|size| of the maximum: a likelihood set, tighter for a large shift, where C moves in
    large steps (Siegmund 1988, Int. Statistical Review 56). At the signals of CUSUM, EWMA and
    Shewhart charts after shifts of 0.5, 1 and 2 standard errors, simulated, it held the true onset
    86 to 95 times in 100. ``direction`` +1 or −1 seeks a rise or a fall only. ValueError for an
    empty series.

    Give only values since an earlier, repaired shift: the search takes that one for the onset too.
    """
    values = np.asarray(z, np.float64)
    if not values.size:
        raise ValueError("an onset needs at least one value")
    sums = values[::-1].cumsum()  # by number of values less one, newest first
    counts = np.arange(1, values.size + 1, dtype=np.float64)
    shrunk = sums / (counts + _PRIOR)
    gain = 0.5 * sums * shrunk
    if direction:
        gain = np.copysign(gain, sums * direction)
    best = int(gain.argmax())
    drop = _DROP - _DROP_PER_SIZE * abs(float(shrunk[best]))
    within = (gain >= gain[best] - max(drop, 0.0)).nonzero()[0]
    oldest, newest = int(within[-1]), int(within[0])
    end = values.size - 1
    return Onset(
        index=end - best,
        first=None if oldest == end else end - oldest,
        last=end - newest,
        size=float(sums[best]) / (best + 1),
    )
