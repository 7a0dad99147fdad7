"""Whether what was agreed is kept: each characteristic's promise, and the crew's budget.

Knows what is agreed and what is foreseen. Must not know words.
"""

from __future__ import annotations

from dataclasses import dataclass

from monitor import times
from monitor.configuration import false_alarms
from monitor.configuration.false_alarms import SHIFT, Total
from monitor.configuration.sections.promise import Budget, Promise
from monitor.plan import CharacteristicPlan

_ROUNDING = 1.005
"""Constants are solved to a thousandth and less; nobody agreed to a half per cent more or less."""


@dataclass(frozen=True, slots=True)
class PromiseVerdict:
    """Seconds between false alarms: promised, and foreseen (None: nobody can tell)."""

    seconds: float
    foreseen: float | None
    kept: bool | None


@dataclass(frozen=True, slots=True)
class BudgetVerdict:
    """False alarms in so many ``seconds``: accepted, and foreseen of all whose pace is known;
    ``kept`` is None where the others may make the difference."""

    alerts: float
    seconds: float
    foreseen: float
    kept: bool | None


def of_promise(plan: CharacteristicPlan, promise: Promise | None) -> PromiseVerdict | None:
    """None without a promise."""
    if promise is None:
        return None
    seconds = promise.false_alarm_every / times.SECOND
    total = false_alarms.total((plan,))
    if total.each_stream or total.unknown:
        return PromiseVerdict(seconds, None, None)
    foreseen = SHIFT / total.together if total.together else float("inf")
    return PromiseVerdict(seconds, foreseen, foreseen * _ROUNDING >= seconds)


def of_budget(total: Total, budget: Budget | None) -> BudgetVerdict | None:
    """None without a budget."""
    if budget is None:
        return None
    seconds = budget.per / times.SECOND
    foreseen = total.together * seconds / SHIFT
    kept: bool | None = foreseen <= budget.alerts * _ROUNDING
    if kept and (total.unknown or total.each_stream):
        kept = None
    return BudgetVerdict(budget.alerts, seconds, foreseen, kept)
