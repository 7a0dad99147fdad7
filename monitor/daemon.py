"""The daemon: the loop that carries readings to the engine and alerts to the broker.

Knows the order of things: read, fold, commit, acknowledge, publish. Must not know how any of it is done.
"""

from __future__ import annotations

import select
import signal
import socket
import time
from pathlib import Path
from typing import Any

import structlog

from monitor import messages
from monitor.engine import Engine
from monitor.entries import Connected, Disconnected, Started
from monitor.health import Health
from monitor.intake import Arrival, Intake
from monitor.journal import Journal
from monitor.mqtt import Link
from monitor.outbox import Outbox
from monitor.outputs import Alert, Output
from monitor.plan import Settings
from monitor.publisher import Publisher

log = structlog.get_logger()

_BATCH = 2_000
_TICK = 1.0
_FAREWELL = 2.0  # seconds the broker has to take our last words
_BACKOFF = (0.05, 0.5, 1.0, 2.0, 5.0, 10.0, 30.0)


class Daemon:
    """One line, watched. ``run`` returns when ``stop`` was called, or the process was told to end."""

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._root = settings.root
        self._journal = Journal(Path(settings.journal))
        self._arrival = Arrival(time.time_ns, time.monotonic_ns, self._journal.last_time)
        self._intake = Intake(self._arrival.now)
        self._engine = Engine(settings.plan, points=settings.points)
        self._outbox = Outbox()
        self._health = Health()
        self._publisher = Publisher(settings.root, self._engine, self._health, self._outbox)
        self._link: Link | None = None
        self._failures = 0
        self._try_at = 0.0
        self._stopping = False
        self._more = False
        self._last_taken = 0

    def run(self) -> None:
        """Watch until told to stop. Raises sqlite3.Error where the journal cannot be written."""
        self._wake, wakes = socket.socketpair()
        for end in (self._wake, wakes):
            end.setblocking(False)
        signal.set_wakeup_fd(wakes.fileno(), warn_on_full_buffer=False)
        for number in (signal.SIGTERM, signal.SIGINT):
            signal.signal(number, lambda *_: self.stop())
        self._recover()
        while not self._stopping:
            self._wait()
            self._turn()
        self._farewell()

    def stop(self) -> None:
        """End soon; safe to call from a signal handler."""
        self._stopping = True

    # What the broker says

    def message(self, topic: str, payload: bytes, retain: bool, qos: int, packet: int) -> None:
        """A message came (mqtt.Receiver)."""
        self._intake.message(topic, payload, retain, qos, packet)

    def subscribed(self, session_present: bool) -> None:
        """Readings reach us (mqtt.Receiver)."""
        now = self._arrival.now()
        self._intake.note(Connected(now, session_present))
        self._failures = 0
        self._health.connected(now)
        log.info("connected", session_present=session_present)

    def taken(self, packet: int) -> None:
        """The broker took over a publication (mqtt.Receiver)."""
        self._last_taken = packet
        place = self._outbox.acknowledged(packet)
        if place is not None:
            self._journal.delivered(place)

    # The loop

    def _recover(self) -> None:
        began, entries = time.monotonic(), 0
        for entry in self._journal.entries():
            self._engine.fold(entry)
            entries += 1
        for waiting in self._journal.waiting():
            self._outbox.add(*waiting)
        seconds = round(time.monotonic() - began, 3)
        log.info("started", entries=entries, seconds=seconds, waiting=len(self._outbox))
        self._intake.note(Started(self._arrival.now()))

    def _wait(self) -> None:
        link = self._link
        timeout = 0.0 if self._more else _TICK
        if link is None:
            timeout = min(timeout, max(0.0, self._try_at - time.monotonic()))
        reading: list[Any] = [self._wake] if link is None else [self._wake, link]
        writing = [link] if link is not None and link.wants_write else []
        ready, _, _ = select.select(reading, writing, [], timeout)
        if self._wake in ready:
            self._wake.recv(64)

    def _turn(self) -> None:
        link, intake = self._link, self._intake
        if link is None and time.monotonic() >= self._try_at:
            link = self._connect()
        if link is not None:
            self._more = link.read(lambda: len(intake.entries) >= _BATCH)
            link = self._if_alive(link)
        entries, acknowledge = intake.take()
        outputs: list[Output] = []
        for entry in entries:
            outputs += self._engine.fold(entry)
        alerts = [
            (f"{self._settings.root}/alert/{messages.path(o.characteristic.name, o.stream)}", e)
            for o in outputs
            if isinstance(o, Alert) and (e := messages.encode(o.event))
        ]
        if entries:
            places = self._journal.commit(entries, alerts)
            for place, alert in zip(places, alerts, strict=True):
                self._outbox.add(place, *alert)
        if link is not None:
            link.acknowledge(acknowledge)
            self._publisher.publish(link, outputs, self._arrival.now())
            link.write()
            self._if_alive(link)

    # The connection

    def _connect(self) -> Link | None:
        settings = self._settings
        filters = dict.fromkeys(c.source.topic for c in settings.plan.characteristics)
        last_words = self._publisher.will(self._arrival.now())
        try:
            self._link = Link(settings.broker, filters, last_words, self)
        except OSError as error:
            self._lost(f"cannot reach {settings.broker.host}:{settings.broker.port}: {error}")
        return self._link

    def _if_alive(self, link: Link) -> Link | None:
        if link.lost is None:
            return link
        link.drop()
        self._link, self._more = None, False
        self._intake.connection_lost()
        self._outbox.connection_lost()
        if self._health.online:
            self._intake.note(Disconnected(self._arrival.now()))
        self._lost(link.lost)
        return None

    def _lost(self, why: str) -> None:
        self._health.disconnected(self._arrival.now(), why)
        delay = _BACKOFF[min(self._failures, len(_BACKOFF) - 1)]
        self._failures += 1
        self._try_at = time.monotonic() + delay
        log.warning("not connected", why=why, next_try_in=delay)

    def _farewell(self) -> None:
        link = self._link
        if link is not None and self._health.online:
            packet = self._publisher.farewell(link, self._arrival.now())
            deadline = time.monotonic() + _FAREWELL
            while link.lost is None and self._last_taken != packet and time.monotonic() < deadline:
                link.write()
                select.select([link], [], [], 0.05)
                link.read(lambda: False)
            link.close()
        self._journal.close()
        log.info("stopped")
