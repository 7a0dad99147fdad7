"""How late every setting catches drifts put into the last part.

Knows banks of detectors, drifts and delays. Must not know false alarms or words.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache, partial

import numpy as np

from monitor import runlengths
from monitor.plan import CusumPlan, Scheme
from replay.readings import Values
from replay.tuning.changed import Drift
from replay.tuning.delays import Resampling
from replay.tuning.drifts import Onsets, before, follow
from replay.tuning.grouped import Grouped
from replay.tuning.result import Delay
from replay.tuning.running import Running
from replay.tuning.stepping import Bank, bank, first_signals, warm

_LONGEST_FLOOR = 1e15

FLOORS = 15
LEAST = 40
"""A drift is followed for so many floors, and at least so many subgroups."""

JOINTLY = -1
"""The key of what several settings do together."""


@dataclass(frozen=True, slots=True)
class Textbook:
    """What the floor is computed from: the standard ``error`` of a mean (gauge's unit), the
    promise in subgroups of one stream, the drift to ignore (gauge's unit), and how many readings
    of a stream, and running seconds, lie from one subgroup to the next."""

    error: float
    interval: float
    ignore: float
    readings: float
    seconds: float

    def floor(self, shift: float) -> float | None:
        """Subgroups that the CUSUM tuned to ``shift`` takes on average; None where none is."""
        return _floor(shift / self.error, self.interval, self.ignore / self.error)


@lru_cache(maxsize=1024)
def _floor(shift: float, interval: float, ignore: float) -> float | None:
    if interval > _LONGEST_FLOOR or interval < 2:
        return None
    try:
        return runlengths.floor(shift, interval, ignore=ignore)
    except ValueError:
        return None


class Catcher:
    """Drifts at the same onsets for every setting of one grouping."""

    def __init__(
        self,
        grouped: Grouped,
        begun: Onsets,
        running: Running,
        resampling: Resampling,
        textbook: Textbook,
    ) -> None:
        self._grouped, self._begun, self._running = grouped, begun, running
        self._resampling, self._textbook = resampling, textbook
        self._side = np.array([onset.side for onset in begun.places], np.int8)
        self._began = moments(grouped, begun, running)
        self._before = before(grouped, begun)
        self._warmed: list[tuple[tuple[int, ...], Bank]] = []

    def warm(self, schemes: Mapping[int, Scheme]) -> None:
        """Let these settings run into the onsets; they are known by their keys from then on."""
        kinds: dict[tuple[type[Scheme], bool], list[int]] = {}
        for key, scheme in schemes.items():
            spread = isinstance(scheme, CusumPlan) and scheme.chart == "variance"
            kinds.setdefault((type(scheme), spread), []).append(key)
        drifts = len(self._begun.places)
        self._warmed = []
        for keys in kinds.values():
            detectors = bank([schemes[key] for key in keys], drifts)
            warm(detectors, self._before)
            self._warmed.append((tuple(keys), detectors))

    def catch(
        self, drift: Drift, wanted: Sequence[int], jointly: Sequence[int] = ()
    ) -> dict[int, Delay]:
        """The delays of the ``wanted`` settings, by key; under ``JOINTLY`` that of whichever of
        the settings named so, all of them wanted too, is first."""
        found: dict[int, Delay] = {}
        joint: Values | None = None
        if not wanted:
            return found
        horizon = self._horizon(drift)
        followed = follow(self._grouped, self._begun, drift, horizon)
        side = self._side * (0 if drift.shape == "spread" else 1)
        steps = len(followed.columns)
        if not steps:
            return found
        seconds = self._running.seconds(followed.instant) - self._began
        chosen = set(wanted)
        for keys, warmed in self._warmed:
            rows = [row for row, key in enumerate(keys) if key in chosen]
            if not rows:
                continue
            detectors = warmed.copy()
            detectors.keep(np.array(rows))
            first = first_signals(detectors, followed.columns, side, len(rows))
            caught = first >= 0
            at = (np.maximum(first, 0), np.arange(len(side))[None, :])
            readings = np.where(caught, followed.readings[at], np.inf)
            late = np.where(caught, np.maximum(seconds[at], 0.0), np.inf)
            for row, each in enumerate(rows):
                found[keys[each]] = self._delay(drift, horizon, readings[row], late[row])
                if keys[each] in jointly:
                    own = np.stack((readings[row], late[row]))
                    joint = own if joint is None else np.minimum(joint, own)
        if joint is not None:
            found[JOINTLY] = self._delay(drift, horizon, joint[0], joint[1])
        return found

    def _horizon(self, drift: Drift) -> int:
        """Larger steps are soon caught: they need not be followed as far."""
        floor = self._textbook.floor(drift.amount) if drift.shape == "step" else None
        if floor is None:
            return self._begun.horizon
        enough = max(FLOORS * floor, LEAST) * self._textbook.readings
        return min(self._begun.horizon, round(enough))

    def _delay(self, drift: Drift, horizon: int, readings: Values, seconds: Values) -> Delay:
        points = partial(self._resampling.quantiles, probabilities=(0.5, 0.9))
        (median_readings, late_readings), (median_seconds, late_seconds) = map(
            points, (readings, seconds)
        )
        floor = self._textbook.floor(drift.amount) if drift.shape == "step" else None
        return Delay(
            shape=drift.shape,
            amount=drift.amount,
            onsets=len(readings),
            caught=int(np.count_nonzero(np.isfinite(readings))),
            horizon=horizon,
            median_readings=median_readings,
            late_readings=late_readings,
            median_seconds=median_seconds,
            late_seconds=late_seconds,
            floor_readings=None if floor is None else floor * self._textbook.readings,
            floor_seconds=None if floor is None else floor * self._textbook.seconds,
        )


def moments(grouped: Grouped, begun: Onsets, running: Running) -> Values:
    """The running second at which each drift begins."""
    return running.seconds(
        np.array([grouped.streams[o.stream].readings.time[o.reading] for o in begun.places])
    )
