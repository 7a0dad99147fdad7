"""What becomes durable and when: batches, snapshots, what is dropped, and waiting out a full disk.

Knows the journal and its keepers. Must not know MQTT, or what entries mean.
"""

from __future__ import annotations

import sqlite3
import time

import structlog

from monitor import recovery
from monitor.ballast import Ballast
from monitor.engine import Engine
from monitor.folding import Folded
from monitor.journal import Batch, Journal
from monitor.plan import RetentionPlan
from monitor.retention import Retention

log = structlog.get_logger()

_SNAPSHOT_AFTER = 20_000  # entries; folding so many again takes a small part of a second
_SNAPSHOT_EVERY = 3_600_000_000  # microseconds
_RETRY = 1.0  # seconds between two tries while the disk takes nothing


class Keeper:
    """Keeps one engine's journal. While ``frozen`` says why, nothing becomes durable."""

    def __init__(self, journal: Journal, engine: Engine, plan: RetentionPlan, behind: int) -> None:
        self.frozen: str | None = None
        self._journal = journal
        self._engine = engine
        self._retention = Retention(plan)
        self._ballast = Ballast(journal.path)
        self._ballast.take()
        self._since_snapshot = behind
        self._snapshot_at = 0
        self._noted = journal.proven
        self._try_at = 0.0

    def keep(self, folded: Folded, proven: int, now: int) -> list[tuple[int, str, bytes]] | None:
        """Make a batch durable; (place, topic, payload) of what leaves through the outbox.

        None where that failed: then the same batch is to be given again, and nothing else.
        """
        if self.frozen is not None and time.monotonic() < self._try_at:
            return None
        if not folded.entries and not self._journal.unsettled and self.frozen is None:
            return []
        try:
            if self.frozen is not None and not self._ballast.has_room():
                raise sqlite3.OperationalError("database or disk is full")
            batch = Batch(folded.entries, folded.alerts, clears=folded.clears)
            places = self._commit(batch, proven, now)
        except sqlite3.OperationalError as error:
            self._freeze(str(error))
            return None
        if self.frozen is not None:
            log.info("the journal takes entries again")
            self.frozen = None
            self._ballast.take()
        leaving = [(alert.topic, alert.event) for alert in folded.alerts]
        leaving += [(topic, b"") for topic in folded.clears]
        return [(place, *each) for place, each in zip(places, leaving, strict=True)]

    def tidy(self) -> None:
        """Between batches, when what is durable has left: what may wait until then."""
        if self.frozen is None:
            self._journal.checkpoint()

    def settle(self, proven: int) -> None:
        """Take down what is remembered, so that the next start has little to fold."""
        if self.frozen is None:
            batch = Batch((), proven=proven)
            if self._since_snapshot:
                self._take_down(batch)
            try:
                self._journal.commit(batch)
            except sqlite3.OperationalError as error:
                log.warning("stopped without a snapshot", why=str(error))

    def _commit(self, batch: Batch, proven: int, now: int) -> list[int]:
        retention = self._retention
        retention.look(self._journal, now)
        batch.pruning = retention.few(len(batch.entries))
        if proven != self._noted:
            batch.proven = proven
        since = self._since_snapshot + len(batch.entries)
        if since >= _SNAPSHOT_AFTER or now - self._snapshot_at >= _SNAPSHOT_EVERY:
            self._take_down(batch)
            batch.base = retention.wants_base()
        try:
            places = self._journal.commit(batch)
        except BaseException:
            # What was taken down is not in the file: take all of it down next time.
            if batch.remembered:
                self._engine.changed.update(dict.fromkeys(self._engine.streams()))
            raise
        self._noted = proven
        self._since_snapshot = since
        if batch.remembered:
            self._since_snapshot, self._snapshot_at = 0, now
        return places

    def _take_down(self, batch: Batch) -> None:
        engine = self._engine
        batch.remembered = recovery.remembered(engine)
        batch.forgotten = list(self._journal.owners() - recovery.owners(engine))

    def _freeze(self, why: str) -> None:
        if self.frozen is None:
            log.error(
                "the journal cannot be written: nothing is acknowledged until it can", why=why
            )
            self._ballast.let_go()
        self.frozen = f"the journal cannot be written: {why}"
        self._try_at = time.monotonic() + _RETRY
