"""A configuration's detectors as a whole, as the crew hears them: what runs today, or would.

Knows what was heard and what each detector does alone. Must not know readings or how drifts are put
in.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from monitor.plan import CharacteristicPlan
from replay.tuning import counting
from replay.tuning.grouped import Grouped
from replay.tuning.hearing import Heard
from replay.tuning.intervals import contradicted, unsteady
from replay.tuning.result import (
    Alarm,
    Delay,
    Extrapolated,
    Grouping,
    Observed,
    Range,
    Setting,
    Together,
)
from replay.tuning.running import PROVE
from replay.tuning.scoring import score
from replay.tuning.showing import ALARMS, Place

NOW = "all configured detectors together"
WITH_IT = "all of the fragment together"

_STANDING = 0.1
"""Of the streams' time: where alerts stand open for longer, the detectors by themselves, which are
never quiet, say little of what the crew hears."""


def together(
    plan: CharacteristicPlan,
    grouped: Grouped,
    heard: Heard,
    alone: Sequence[Setting],
    unfollowed: Sequence[str],
    delays: Sequence[Delay],
    found: Grouping,
    number: int,
    place: Place,
    name: str = NOW,
) -> Together:
    """``alone`` are the settings of the detectors of ``plan``, each by itself; ``number`` is the
    place of their grouping ``found``."""
    proof = max(grouped.proof, 1)
    standing = heard.standing / proof
    quiet = 1 - standing
    seconds = quiet * grouped.proof / found.rate
    rings = len(heard.rings)
    moments = place.running.seconds(np.array([ring.time for ring in heard.rings], np.int64))
    interval = None
    if not found.wander.wanders:
        begun = PROVE * place.running.whole
        interval = counting.between(rings, seconds, quiet * (moments - begun))
    observed = Observed(rings, seconds, interval)
    extrapolated, why = summed(alone, unfollowed, standing, found)
    judgement = plan.example()[1]
    return Together(
        name=name,
        detectors=tuple(each.name for each in judgement.detectors) if judgement else (),
        unfollowed=tuple(unfollowed),
        grouping=number,
        observed=observed,
        signals=heard.signals,
        standing=standing,
        extrapolated=extrapolated,
        no_interval=why,
        delays=tuple(delays),
        curve=(),
        events=score(place.labels, place.streams, heard.signalled, place.running),
        alarms=tuple(
            Alarm(ring.time, place.streams[ring.stream], ring.direction)
            for ring in heard.rings[:ALARMS]
        ),
        asked=place.promise,
        meets=extrapolated is not None
        and place.promise <= extrapolated.interval.low
        and not contradicted(observed, place.promise),
    )


def summed(
    alone: Sequence[Setting], unfollowed: Sequence[str], standing: float, found: Grouping
) -> tuple[Extrapolated | None, str]:
    """The interval of all of them, or why none is told.

    Rates of detectors on the same readings add up to no less than that of all together, and all
    together ring at least as often as the one that rings most.
    """
    if found.wander.wanders:
        return None, unsteady(found)
    if standing > _STANDING:
        return None, (
            "alerts stood open for more than a tenth of the time, and while one does, nothing more "
            "rings: the baseline is off, or limits are far too narrow"
        )
    if unfollowed:
        return None, f"{_listed(unfollowed)} cannot be extrapolated"
    told = [each.extrapolated for each in alone if each.extrapolated is not None]
    if len(told) < len(alone) or not told:
        missing = [each.name for each in alone if each.extrapolated is None]
        return None, f"there is none for {_listed(missing)}" if missing else "there is none"
    if any(each.interval.low <= 0 for each in told):
        return None, "the recording leaves that of one detector quite open"
    seconds = _rates_added([each.seconds for each in told])
    low = _rates_added([each.interval.low for each in told])
    ends = [each.interval.high for each in told if each.interval.high is not None]
    high = min(ends, default=None)
    factor = max(seconds / low, high / seconds if high is not None else 1.0)
    return Extrapolated(seconds, factor, Range(low, high)), ""


def _rates_added(intervals: Sequence[float]) -> float:
    return 1.0 / math.fsum(1.0 / each for each in intervals)


def _listed(names: Sequence[str]) -> str:
    *most, last = names
    return f"{', '.join(most)} and {last}" if most else last
