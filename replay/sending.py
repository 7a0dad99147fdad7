"""Publishing at a broker, QoS 1, until it has taken over everything.

Knows paho, and what a lost connection costs. Must not know recordings, or when a message is due.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion
from paho.mqtt.reasoncodes import ReasonCode

PATIENCE = 30.0  # seconds a lost broker has to come back and take over a message
_ANSWER = 10.0  # seconds a broker has to answer our CONNECT
_PARTING = 2.0  # seconds it has to take over what is under way when we are told to stop
_WINDOW = 500
"""Messages under way: enough to keep a broker busy, far from the 65,535 packet identifiers."""

_LOOK = 0.25
_WHO_ARE_YOU = (0x86, 0x87)  # bad user name or password, not authorized (MQTT 5, section 3.2.2.2)
_BACKOFF = (0.1, 0.5, 1.0, 2.0, 5.0)


class SendingError(Exception):
    """The broker cannot be reached, or will not have us; the text says why and what to do."""


class Sender:
    """A client of the broker at ``host``:``port``.

    A connection that is lost is made again, and what the broker had not taken over is sent again:
    at least once, in order but for that. SendingError where it takes nothing for ``patience``
    seconds. ``idle`` is called every quarter of a second while it waits.
    """

    def __init__(
        self,
        host: str,
        port: int,
        username: str | None,
        password: str | None,
        idle: Callable[[], object],
        patience: float = PATIENCE,
    ) -> None:
        self.taken = 0
        """Messages that the broker has taken over."""
        self.reconnects = 0
        self._address = host, port
        self._where = f"{host}:{port}"
        self._named = username is not None
        self._idle = idle
        self._patience = patience
        self._under_way = 0
        self._connected = False
        self._refused = ""
        self._why = ""
        self._failures = 0
        self._lost_at: float | None = None
        """When the connection was lost, if nothing has been taken over since."""
        client = self._client = paho.Client(
            CallbackAPIVersion.VERSION2, clean_session=True, reconnect_on_failure=False
        )
        client.connect_timeout = 5.0
        # Without a limit of its own; with one, each acknowledgement costs paho a search.
        client.max_inflight_messages_set(0)
        client.username_pw_set(username, password)
        client.on_connect = self._on_connect
        client.on_disconnect = self._on_disconnect
        client.on_publish = self._on_publish

    def connect(self) -> None:
        """Reach the broker, for the first time; SendingError at once where it cannot be."""
        try:
            self._client.connect(*self._address)
        except (OSError, UnicodeError) as error:
            raise SendingError(
                f"no broker answers at {self._where} ({_reason(error)}): is it running, and on "
                "that port?"
            ) from None
        self._await_answer()
        if not self._connected:
            raise SendingError(
                f"what listens at {self._where} does not answer as an MQTT broker ({self._why})"
            )

    def publish(self, topic: str, payload: bytes, *, retain: bool) -> None:
        """Queue a message, once there is room; ValueError where MQTT cannot carry it."""
        if "\0" in topic:
            raise ValueError("no topic may hold a NUL")
        while self._under_way >= _WINDOW:
            self.wait(_LOOK)
        self._client.publish(topic, payload, qos=1, retain=retain)
        self._under_way += 1

    def wait(self, seconds: float) -> None:
        """Keep the connection going for so long, at most until something moves."""
        self._client.loop(min(seconds, _LOOK))
        if not self._connected:
            self._reconnect()
        self._idle()

    def finish(self) -> None:
        """Wait until the broker has taken over everything, and say goodbye."""
        while self._under_way:
            self.wait(_LOOK)
        self._client.disconnect()

    def abandon(self) -> None:
        """Say goodbye, with a moment for what is under way."""
        deadline = time.monotonic() + _PARTING
        while self._under_way and self._connected and time.monotonic() < deadline:
            self._client.loop(_LOOK)
        self._client.disconnect()

    def _reconnect(self) -> None:
        """Try until there is a connection."""
        if self._lost_at is None:
            self._lost_at = time.monotonic()
        while not self._connected:
            if time.monotonic() >= self._lost_at + self._patience:
                raise SendingError(
                    f"the broker at {self._where} has taken nothing for {self._patience:g} s "
                    f"({self._why})"
                )
            self._pause(_BACKOFF[min(self._failures, len(_BACKOFF) - 1)])
            self._failures += 1
            try:
                self._client.reconnect()
            except OSError as error:
                self._why = _reason(error)
                continue
            self._await_answer()
        self.reconnects += 1
        if not self._under_way:
            self._recovered()

    def _recovered(self) -> None:
        self._failures, self._lost_at = 0, None

    def _pause(self, seconds: float) -> None:
        until = time.monotonic() + seconds
        while (left := until - time.monotonic()) > 0:
            time.sleep(min(left, _LOOK))
            self._idle()

    def _await_answer(self) -> None:
        """Until the broker has answered our CONNECT, or the connection is lost."""
        self._why = ""
        deadline = time.monotonic() + _ANSWER
        while not (self._connected or self._refused or self._why):
            if time.monotonic() >= deadline:
                self._why = "it says nothing"
                return
            self._client.loop(_LOOK)
            self._idle()
        if self._refused:
            raise SendingError(
                f"the broker at {self._where} refused the connection: {self._refused}"
            )

    def _on_connect(
        self, client: object, userdata: object, flags: object, reason: ReasonCode, _: object
    ) -> None:
        if reason.is_failure:
            self._refused = str(reason)
            if reason.value in _WHO_ARE_YOU:
                known = "are --username and what --password-file holds right?"
                self._refused += f": {known if self._named else 'give --username'}"
        else:
            self._connected = True

    def _on_disconnect(
        self, client: object, userdata: object, flags: object, reason: Any, _: object
    ) -> None:
        self._connected = False
        self._why = self._why or str(reason)

    def _on_publish(
        self, client: object, userdata: object, mid: int, reason: object, _: object
    ) -> None:
        self._under_way -= 1
        self.taken += 1
        self._recovered()


def _reason(error: Exception) -> str:
    return getattr(error, "strerror", None) or str(error)
