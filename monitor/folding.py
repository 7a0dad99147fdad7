"""A batch, folded: what it caused, in the shape the journal and the broker want it.

Knows outputs and which entry caused each. Must not know files, sockets or a clock.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Protocol

from monitor.engine import Engine
from monitor.entries import Recorded
from monitor.journal import AlertRow
from monitor.outputs import Alert, Gone, Output


class Addresses(Protocol):
    """Where outputs are published."""

    def alert(self, output: Alert, entry: int) -> AlertRow:
        """An alert as the journal keeps it; ``entry`` of the batch caused it."""

    def clears(self, output: Gone) -> tuple[str, ...]:
        """The topics whose retained messages are to go with a stream."""


@dataclass(slots=True)
class Folded:
    """A batch that the engine has folded and that is not durable yet."""

    entries: Sequence[Recorded]
    acknowledge: Sequence[int]
    outputs: list[Output] = field(default_factory=list)
    alerts: list[AlertRow] = field(default_factory=list)
    clears: list[str] = field(default_factory=list)


def fold(
    engine: Engine, addresses: Addresses, entries: Sequence[Recorded], acknowledge: Sequence[int]
) -> Folded:
    """Fold a batch; ``acknowledge`` are the packet identifiers that its commit will allow."""
    folded = Folded(entries, acknowledge)
    outputs = folded.outputs
    for index, entry in enumerate(entries):
        for output in engine.fold(entry):
            outputs.append(output)
            if isinstance(output, Alert):
                folded.alerts.append(addresses.alert(output, index))
            elif isinstance(output, Gone):
                folded.clears += addresses.clears(output)
    return folded
