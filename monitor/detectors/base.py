"""What every detector is to the engine: a step, its signals, its rows, a restart.

Knows subgroups and signals. Must not know alerts, streams or any particular chart.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple, Protocol

from monitor.outputs import Row
from monitor.plan import Direction
from monitor.subgroups import Subgroup


class Signal(NamedTuple):
    """A detector's rule met at one subgroup; ``value`` and limits in the characteristic's unit.

    ``span`` is the number of points the rule looks at, ``needed`` how many a zone rule asks for.
    ``direction`` is the side the process mean went to; None for spread and for patterns without a
    side. ``ratio`` is about how many times its usual spread the stream has had since ``onset``
    (µs), where a detector of spread can tell.
    """

    rule: str
    direction: Direction | None
    statistic: str
    value: float
    lower: float | None
    upper: float | None
    span: int = 1
    needed: int = 0
    ratio: float | None = None
    onset: int | None = None


NO_SIGNALS: tuple[Signal, ...] = ()


def met(signals: tuple[Signal, ...], statistic: str) -> tuple[str, ...]:
    """The rules that ``statistic`` met."""
    return tuple(s.rule for s in signals if s.statistic == statistic) if signals else ()


class Detector(Protocol):
    """A chart with its decision rule, for one stream."""

    def step(self, subgroup: Subgroup) -> tuple[Signal, ...]:
        """Take the next subgroup; returns the rules it met, in the order they are declared."""

    def rows(self, name: str, signals: tuple[Signal, ...]) -> tuple[Row, ...]:
        """The statistics of the latest step, with their limits and the rules among ``signals`` that
        they met; empty where the step was blank."""

    def restart(self) -> None:
        """Forget all that was seen."""

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
