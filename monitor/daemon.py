"""The daemon: the loop that carries readings to the engine and alerts to the broker.

Knows the order: read, fold, commit, acknowledge, publish. Must not know how any of it is done.
"""

from __future__ import annotations

import time
from pathlib import Path

import structlog

from monitor.dialling import Dialler
from monitor.engine import Engine
from monitor.entries import Connected, Disconnected, Started, Tick
from monitor.health import Health
from monitor.intake import Arrival, Intake
from monitor.journal import Journal
from monitor.mqtt import Link
from monitor.outbox import Outbox
from monitor.plan import Settings
from monitor.publisher import Publisher
from monitor.wakeup import Wakeup

log = structlog.get_logger()

_LONGEST_WAIT = 1.0  # seconds
_FAREWELL = 2.0  # seconds the broker has to take our last words


class Daemon:
    """One line, watched. ``run`` returns when the process was told to end."""

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._journal = Journal(Path(settings.journal))
        self._arrival = Arrival(time.time_ns, time.monotonic_ns, self._journal.last_time)
        self._intake = Intake(self._arrival.now)
        self._engine = Engine(settings.plan, points=settings.points)
        self._outbox = Outbox()
        self._health = Health()
        self._publisher = Publisher(settings.root, self._engine, self._health, self._outbox)
        self._wakeup = Wakeup()
        self._dialler = Dialler(settings.broker.host, settings.broker.port, self._wakeup)
        self._link: Link | None = None
        self._more = False
        self.message = self._intake.message  # mqtt.Receiver; bound: it is called for each reading

    def run(self) -> None:
        """Watch until told to stop. Raises sqlite3.Error where the journal cannot be written."""
        self._wakeup.on_signals()
        self._recover()
        while not self._wakeup.stopping:
            self._wait()
            self._turn()
        self._farewell()

    def subscribed(self, session_present: bool) -> None:
        """Readings reach us (mqtt.Receiver)."""
        now = self._arrival.now()
        self._intake.note(Connected(now, session_present))
        self._health.connected(now)
        self._dialler.holds()
        log.info("connected", session_present=session_present)

    def taken(self, packet: int) -> None:
        """The broker took over a publication (mqtt.Receiver)."""
        place = self._outbox.acknowledged(packet)
        if place is not None:
            self._journal.delivered(place)

    def _recover(self) -> None:
        log.info("starting", journal=self._settings.journal)
        count = 0
        for entry in self._journal.entries():
            if self._wakeup.stopping:
                return
            self._engine.fold(entry)
            count += 1
        for waiting in self._journal.waiting():
            self._outbox.add(*waiting)
        log.info("started", entries=count, waiting=len(self._outbox))
        self._intake.note(Started(self._arrival.now()))

    def _wait(self) -> None:
        timeout = 0.0 if self._more else self._arrival.until(self._engine.next_deadline())
        if self._link is None:
            timeout = min(timeout, self._dialler.delay())
        self._wakeup.wait(self._link, min(timeout, _LONGEST_WAIT))

    def _turn(self) -> None:
        link = self._link or self._connect()
        if link is not None:
            self._more = link.read(self._intake.full)
            self._let_go_if_lost(link)
        if self._arrival.until(self._engine.next_deadline()) == 0.0:
            self._intake.note(Tick(self._arrival.now()))
        entries, acknowledge = self._intake.take()
        outputs = [output for entry in entries for output in self._engine.fold(entry)]
        alerts = self._publisher.alerts(outputs)
        if entries or self._journal.unsettled:
            places = self._journal.commit(entries, alerts)
            for place, alert in zip(places, alerts, strict=True):
                self._outbox.add(place, *alert)
        if self._link is not None:
            self._link.acknowledge(acknowledge)
            self._health.unsafe = self._intake.unsafe
            self._publisher.publish(self._link, outputs, self._arrival.now())
            self._link.write()
            self._let_go_if_lost(self._link)

    def _connect(self) -> Link | None:
        broker = self._settings.broker
        try:
            connection = self._dialler.ask()
        except OSError as error:
            self._lost(f"cannot reach {broker.host}:{broker.port}: {error}")
            return None
        if connection is not None:
            filters = dict.fromkeys(c.source.topic for c in self._settings.plan.characteristics)
            will = self._publisher.will(self._arrival.now())
            self._link = Link(connection, broker, filters, will, self)
        return self._link

    def _let_go_if_lost(self, link: Link) -> None:
        if link.lost is None:
            return
        link.drop()
        self._link, self._more = None, False
        self._intake.connection_lost()
        self._outbox.connection_lost()
        if self._health.online:
            self._intake.note(Disconnected(self._arrival.now()))
        self._lost(link.lost)

    def _lost(self, why: str) -> None:
        self._health.disconnected(self._arrival.now(), why)
        log.warning("not connected", why=why, next_try_in=self._dialler.lost())

    def _farewell(self) -> None:
        if self._link is not None:
            self._publisher.farewell(self._link, self._arrival.now())
            self._link.close(_FAREWELL)
        self._journal.close()
        log.info("stopped")
