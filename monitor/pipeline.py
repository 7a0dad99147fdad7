"""From what came in to what is durable and may leave: one engine with its journal.

Knows the order: match what is sent again, fold, commit. Must not know MQTT or when to publish.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from pathlib import Path

import structlog

from monitor.entries import Configured, Connected, Disconnected, Recorded, Started, Tick
from monitor.folding import Addresses, Folded, fold
from monitor.intake import Arrival, Intake
from monitor.journal import Journal
from monitor.keeper import Keeper
from monitor.outbox import Outbox
from monitor.pinning import pinned
from monitor.plan import Plan, Settings
from monitor.recovery import recover
from monitor.resends import Resends

log = structlog.get_logger()


class Pipeline:
    """Everything between the connection's reading and its writing.

    JournalError where the journal cannot be used.
    """

    def __init__(self, settings: Settings, stopping: Callable[[], bool]) -> None:
        log.info("starting", journal=settings.journal)
        journal = self._journal = Journal(Path(settings.journal))
        recovered = recover(journal.db, settings.plan, settings.points, stopping)
        self.engine = recovered.engine
        self.filters = journal.filters() | self.engine.plan.topics()
        """All that the broker's session may be subscribed to."""
        self.outbox = Outbox(journal.waiting())
        self.resends = Resends(journal.unproven(), journal.proven)
        self._arrival = Arrival(time.time_ns, time.monotonic_ns, journal.last_time)
        self.intake = Intake(self.now, self.resends)
        self._keeper = Keeper(journal, self.engine, settings.retention, recovered.folded)
        self._folded: Folded | None = None
        self._whole = recovered.whole
        if recovered.whole:
            log.info("started", entries=recovered.folded, waiting=len(self.outbox))
        self.note(Started(self.now()))

    @property
    def frozen(self) -> str | None:
        """Why nothing becomes durable right now."""
        return self._keeper.frozen

    @property
    def position(self) -> int:
        """Of the newest durable entry."""
        return self._journal.position

    def now(self) -> int:
        """The arrival of what arrives now."""
        return self._arrival.now()

    def seconds_to_next(self) -> float:
        """Until there is something to do, though nothing comes."""
        if self.frozen is not None or self.intake.holding:
            return math.inf  # nothing is folded: what is due waits
        return self._arrival.until(self.engine.next_deadline())

    def note(self, entry: Recorded) -> None:
        """Something happened that moves state."""
        self.intake.note(entry)

    def configure(self, plan: Plan) -> None:
        """From now on this plan is in force; what was worked out for the same stays as it was."""
        self.note(Configured(self.now(), pinned(plan, self.engine.plan)))

    def step(self, addresses: Addresses) -> Folded:
        """Fold what came in, and make it durable; what may be acknowledged and said now."""
        folded = self._folded = self._folded or self._fold(addresses)
        position = self.position
        leaving = self._keeper.keep(folded, self.resends.proven, self.now())
        if leaving is None:  # the same again, once the disk takes it
            return Folded((), ())
        self._folded = None
        self.outbox.extend(leaving)
        self.resends.journaled(position + 1, folded.entries)
        return folded

    def tidy(self) -> None:
        """What may wait until what was folded has left."""
        self._keeper.tidy()

    def taken(self, packet: int) -> None:
        """The broker took over a publication."""
        self.resends.taken(packet)
        place = self.outbox.acknowledged(packet)
        if place is not None:
            self._journal.delivered(place)

    def connecting(self) -> None:
        """A new connection is made: what comes first may have come before."""
        self.resends.reconnected(self._folded.entries if self._folded else ())

    def subscribed(self, session_present: bool) -> None:
        """Readings reach us from now on."""
        if not session_present:
            self.resends.session_gone()
        self.note(Connected(self.now(), session_present))

    def connection_lost(self, was_online: bool) -> None:
        """What was not acknowledged will be sent again."""
        if self._folded is not None:
            self._folded.acknowledge = ()
        self.intake.connection_lost()
        self.outbox.connection_lost()
        if was_online:
            self.note(Disconnected(self.now()))

    def close(self) -> None:
        """Let go of the journal, with what is remembered taken down."""
        if self._whole:
            self._keeper.settle(self.resends.proven)
        self._journal.close()

    def _fold(self, addresses: Addresses) -> Folded:
        if self.seconds_to_next() == 0.0:
            self.note(Tick(self.now()))
        return fold(self.engine, addresses, *self.intake.take())
