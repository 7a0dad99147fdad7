"""Reaching the broker: one try at a time, and when the next is due.

Knows addresses, sockets, certificates and backoff. Must not know MQTT, or what a connection is for.
"""

from __future__ import annotations

import math
import socket
import ssl
import time
from collections.abc import Callable
from concurrent.futures import Future
from threading import Thread

from monitor.plan import BrokerPlan

_TIMEOUT = 5.0  # seconds for each address a name stands for
_BACKOFF = (0.05, 0.5, 1.0, 2.0, 5.0, 10.0, 30.0)
_CONTENDED = 3
_STEADY = 1.0  # seconds; a connection that held so long was a good one


class Dialler:
    """Tries one address for ever: at once after a good connection, else ever more seldom.

    A try runs in a thread of its own, because nothing interrupts the wait for a name server, and a
    process that is told to stop must. ``wake`` is called from that thread when the try is over.
    """

    def __init__(self, broker: BrokerPlan, wake: Callable[[], object]) -> None:
        self._address = broker.host, broker.port
        self._tls = broker.tls
        self._wake = wake
        self._trying: Future[socket.socket] | None = None
        self._failures = 0
        self._try_at = -math.inf
        self._held_since = math.inf
        self._ended_at_once = 0

    def delay(self) -> float:
        """Seconds until ``ask`` has something to do, unless ``wake`` is called before."""
        if self._trying is not None:
            return 0.0 if self._trying.done() else math.inf
        return max(0.0, self._try_at - time.monotonic())

    def ask(self) -> socket.socket | None:
        """The connection, once there is one; until then tries, each when it is due.

        Raises OSError where a try failed: then call ``lost``, as when a connection was lost.
        """
        trying = self._trying
        if trying is None:
            if time.monotonic() >= self._try_at:
                self._trying = Future()
                Thread(target=self._try, args=(self._trying,), daemon=True).start()
            return None
        if not trying.done():
            return None
        self._trying = None
        return trying.result()

    @property
    def is_contended(self) -> bool:
        """Whether connections that were good ended at once, several in a row.

        So it looks when two clients share a client id: the broker ends the one for the other.
        """
        return self._ended_at_once >= _CONTENDED

    def holds(self) -> None:
        """The connection is good for what it was made for."""
        self._held_since = time.monotonic()

    def lost(self) -> float:
        """There is no connection any more, or again; returns the seconds until the next try."""
        now = time.monotonic()
        if now - self._held_since >= _STEADY:
            # Not sooner: two daemons under one client id end each other's connection at once.
            self._failures = self._ended_at_once = 0
        elif self._held_since != math.inf:
            self._ended_at_once += 1
        self._held_since = math.inf
        delay = _BACKOFF[min(self._failures, len(_BACKOFF) - 1)]
        self._failures += 1
        self._try_at = now + delay
        return delay

    def _try(self, result: Future[socket.socket]) -> None:
        try:
            connection = socket.create_connection(self._address, _TIMEOUT)
            result.set_result(connection if self._tls is None else self._secured(connection))
        except OSError as error:  # those of TLS among them
            result.set_exception(error)
        except UnicodeError:  # from the codec of host names
            result.set_exception(OSError("no host can have this name"))
        self._wake()

    def _secured(self, connection: socket.socket) -> socket.socket:
        """The connection once both sides have shown the certificates they must."""
        assert self._tls is not None
        try:
            # Read at each try: certificates are renewed while we run.
            context = ssl.create_default_context(cafile=self._tls.ca)
            if self._tls.certificate is not None:
                context.load_cert_chain(self._tls.certificate, self._tls.key)
            return context.wrap_socket(connection, server_hostname=self._address[0])
        except OSError:
            connection.close()
            raise
