"""From what a detector is asked to do to the constants that do it, on a given baseline.

Knows sigma, and which method solves which kind. Must not know streams, time or where an intent was
written down. Formulas: the methods that ``monitor.runlengths`` names.
"""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

from monitor import runlengths
from monitor.detectors.charts import SPREAD, standard_error
from monitor.methods.runlength.cusum import BOTH_HIGH
from monitor.plan import BaselinePlan, CusumPlan, EwmaPlan, Intent, Scheme

_REMEMBERED = 65_536
"""Solutions; all of a configuration is asked for more than once, in the same order, so that one
solution more than are remembered would have each worked out anew."""


class UnsolvableError(ValueError):
    """No constants do what is asked. ``key`` of the detector is what stands in the way."""

    def __init__(self, key: str, wrong: str, instead: str) -> None:
        super().__init__(f"{key} {wrong}; {instead}")
        self.key, self.wrong, self.instead = key, wrong, instead


def solved(intent: Intent, baseline: BaselinePlan) -> Scheme:
    """The scheme that rings once in ``intent.interval`` subgroups with nothing wrong; with a clip
    perhaps more rarely, since run lengths then jump. Raises UnsolvableError.
    """
    if intent.chart in SPREAD:
        return _spread(intent)
    error = standard_error(baseline, intent.size)
    scheme = _location(replace(intent, catch=None, ignore=0.0), *_sizes(intent, error))
    if isinstance(scheme, CusumPlan | EwmaPlan):
        scheme = replace(scheme, hold=intent.hold)
    return replace(scheme, chart=intent.chart)


def _sizes(intent: Intent, error: float) -> tuple[float | None, float]:
    """What to catch and what to ignore, in standard errors."""
    return None if intent.catch is None else intent.catch / error, intent.ignore / error


@lru_cache(maxsize=_REMEMBERED)
def _location(intent: Intent, catch: float | None, ignore: float) -> Scheme:
    """A scheme for the mean or the median; ``catch`` and ``ignore`` in standard errors."""
    try:
        if intent.chart == "median":
            return runlengths.solve_median(intent.interval, intent.size, intent.direction)
        return runlengths.solve(
            intent.kind,
            catch or 0.0,
            intent.interval,
            ignore=ignore,
            direction=intent.direction,
            head_start=intent.head_start,
            asymptotic=intent.asymptotic,
            clip=intent.clip,
        )
    except ValueError:
        if intent.head_start > BOTH_HIGH and intent.direction == "both":
            # Where a lower one has no constants either, it says why.
            _location(replace(intent, head_start=BOTH_HIGH), catch, ignore)
            wrong = "lets both sums begin so high that how often they ring cannot be computed"
            raise UnsolvableError("head_start", wrong, f"write {BOTH_HIGH:g} or less") from None
        if intent.clip is not None:
            # Where that has no constants either, it says why.
            free = _location(replace(intent, clip=None), catch, ignore)
            raise UnsolvableError("clip", _too_tight(free), _WIDER) from None
        if catch is None:
            raise _too_often() from None
        wrong = f"cannot be told from nothing wrong ({catch:.2g} standard errors of the mean)"
        if catch - ignore > 0.5:
            raise _too_often() from None
        raise UnsolvableError(
            "catch", wrong, "write a larger one, less to ignore, or gather larger subgroups"
        ) from None


_WIDER = "write a larger one, or leave it out"


def _too_tight(free: Scheme) -> str:
    """What is wrong with a clip where the scheme would be ``free`` without it."""
    if isinstance(free, CusumPlan):
        return f"leaves too little above the k that was worked out ({free.k:.3g} standard errors)"
    return "is so small that no average could ever reach its limit"


@lru_cache(maxsize=1024)
def _spread(intent: Intent) -> Scheme:
    try:
        if intent.catch_ratio is None:
            return runlengths.solve_spread_chart(
                intent.chart, intent.interval, intent.size, intent.direction
            )
        scheme = runlengths.solve_variance(
            intent.catch_ratio,
            intent.interval,
            size=intent.size,
            direction=intent.direction,
            head_start=intent.head_start,
        )
    except ValueError:
        if intent.catch_ratio is None or abs(intent.catch_ratio - 1) > 0.1:
            raise _too_often() from None
        wrong = "is too close to the usual spread to be told from it"
        raise UnsolvableError("catch_ratio", wrong, "write a ratio farther from 1") from None
    return replace(scheme, hold=intent.hold)


def _too_often() -> UnsolvableError:
    wrong = "is to ring so often that no constants are right"
    return UnsolvableError("", wrong, "write a longer promise.false_alarm_every")
