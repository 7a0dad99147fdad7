"""What a count of false alarms says of the time between them.

Knows counts. Must not know detectors or streams.
"""

from __future__ import annotations

import math

import numpy as np

from monitor.methods import chi_square
from replay.readings import Values
from replay.tuning.result import Range

_SURELY_THREE = 3.0  # −ln 0.05: with none seen, so many or fewer were due, with 95 %
_EXACT_TO = 200
_Z = 1.645
_BLOCKS = 20
_ENOUGH = 10


def between(alarms: int, seconds: float, moments: Values | None = None) -> Range | None:
    """Seconds from one alarm to the next, where ``alarms`` came in ``seconds``: 90 %.

    Poisson limits (F. Garwood 1936, Biometrika 28). ``moments`` (seconds) of the alarms widen them
    where alarms come in swarms: by the variance of counts in twenty equal stretches over their
    mean. With none seen the lower end is a third of the time, at 95 %. None without time.
    """
    if seconds <= 0:
        return None
    if alarms == 0:
        return Range(seconds / _SURELY_THREE, None)
    swarming = 1.0
    if moments is not None and alarms >= _ENOUGH:
        counts, _ = np.histogram(moments, _BLOCKS, (0.0, seconds))
        swarming = max(1.0, float(counts.var(ddof=1) / counts.mean()))
    events = alarms / swarming
    low, high = _limits(events)
    return Range(seconds / (high * swarming), seconds / (low * swarming) if low > 0 else None)


def _limits(count: float) -> tuple[float, float]:
    """Limits of a Poisson mean, exact for whole small counts, else those of Wilson & Hilferty (as
    D. P. Byar used them), within 1 % of exact from 5 up."""
    if count == round(count) and count <= _EXACT_TO:
        whole = round(count)
        return (
            chi_square.lower_point(0.05, 2 * whole) / 2,
            chi_square.upper_point(0.05, 2 * whole + 2) / 2,
        )
    more = count + 1
    low = count * max(0.0, 1 - 1 / (9 * count) - _Z / (3 * math.sqrt(count))) ** 3
    high = more * (1 - 1 / (9 * more) + _Z / (3 * math.sqrt(more))) ** 3
    return low, high
