"""The daemon: the loop that carries readings to the engine and alerts to the broker.

Knows the order: read, fold, commit, acknowledge, publish. Must not know how any of it is done.
"""

from __future__ import annotations

from collections.abc import Callable

import structlog

from monitor.dialling import Dialler
from monitor.health import Health
from monitor.mqtt import Link
from monitor.pipeline import Pipeline
from monitor.plan import Settings
from monitor.publisher import Publisher
from monitor.wakeup import Wakeup

log = structlog.get_logger()

_LONGEST_WAIT = 1.0  # seconds
_FAREWELL = 2.0  # seconds the broker has to take our last words


class Daemon:
    """One line, watched. ``run`` returns when the process was told to end.

    ``reload`` reads the configuration again: the settings, or None where they cannot be used.
    """

    def __init__(self, settings: Settings, reload: Callable[[], Settings | None]) -> None:
        self._settings, self._reload = settings, reload
        self._wakeup = Wakeup()
        self._wakeup.on_signals()
        pipeline = self._pipeline = Pipeline(settings, self._wakeup.is_stopping)
        self._health = Health()
        self._publisher = Publisher(settings.root, pipeline.engine, self._health, pipeline.outbox)
        self._dialler = Dialler(settings.broker, self._wakeup)
        self._link: Link | None = None
        self._stale = pipeline.filters
        self._more = False
        # mqtt.Receiver; bound, as they are called for each reading and each publication
        self.message = pipeline.intake.message
        self.taken = pipeline.taken

    def run(self) -> None:
        """Watch until told to stop."""
        self._configure(self._settings)
        while not self._wakeup.stopping:
            self._wait()
            if self._wakeup.take_reload() and (changed := self._reload()) is not None:
                self._configure(changed)
            self._turn()
        self._farewell()

    def subscribed(self, session_present: bool) -> None:
        """Readings reach us (mqtt.Receiver)."""
        self._pipeline.subscribed(session_present)
        self._health.connected(self._pipeline.now())
        self._dialler.holds()
        log.info("connected", session_present=session_present)

    def _wait(self) -> None:
        timeout = 0.0 if self._more else self._pipeline.seconds_to_next()
        if self._link is None:
            timeout = min(timeout, self._dialler.delay())
        # A connection that is not read while nothing more can be taken would end each wait at once.
        link = None if self._pipeline.intake.full() else self._link
        self._wakeup.wait(link, min(timeout, _LONGEST_WAIT))

    def _turn(self) -> None:
        pipeline = self._pipeline
        link = self._link or self._connect()
        if link is not None:
            self._more = link.read(pipeline.intake.full)
            self._let_go_if_lost(link)
        folded = pipeline.step(self._publisher)
        self._health.frozen = pipeline.frozen
        self._health.unsafe = pipeline.intake.unsafe
        self._more = self._more and pipeline.frozen is None
        link = self._link
        if link is not None:
            link.acknowledge(folded.acknowledge)
            self._publisher.publish(link, folded.outputs, pipeline.now())
            pipeline.resends.proof(link.last_packet, pipeline.position)
            link.write()
            self._let_go_if_lost(link)
        pipeline.tidy()

    def _configure(self, settings: Settings) -> None:
        before = self._stale | self._settings.plan.topics()
        self._stale = before - settings.plan.topics()
        self._settings = settings
        self._pipeline.configure(settings.plan)
        if self._link is not None:
            self._link.subscribe(settings.plan.topics(), self._stale)

    def _connect(self) -> Link | None:
        broker, topics = self._settings.broker, self._settings.plan.topics()
        try:
            connection = self._dialler.ask()
        except OSError as error:
            self._lost(f"cannot reach {broker.host}:{broker.port}: {error}")
            return None
        if connection is not None:
            self._pipeline.connecting()
            will = self._publisher.will(self._pipeline.now())
            self._link = Link(connection, broker, topics, self._stale, will, self)
        return self._link

    def _let_go_if_lost(self, link: Link) -> None:
        if link.lost is None:
            return
        link.drop()
        self._link, self._more = None, False
        self._pipeline.connection_lost(self._health.online)
        self._lost(link.lost)

    def _lost(self, why: str) -> None:
        delay = self._dialler.lost()
        if self._dialler.is_contended:
            name = self._settings.broker.client_id
            why = f"{why}; perhaps another client has our client id {name!r}"
        self._health.disconnected(self._pipeline.now(), why)
        log.warning("not connected", why=why, next_try_in=delay)

    def _farewell(self) -> None:
        if self._link is not None:
            self._publisher.farewell(self._link, self._pipeline.now())
            self._pipeline.resends.proof(self._link.last_packet, self._pipeline.position)
            self._link.close(_FAREWELL)
        self._pipeline.close()
        log.info("stopped")
