"""One connection to the broker, from CONNECT to its end; for the next, a new one is made.

Knows paho and sockets. Must not know what messages mean, or how a broker is reached.
"""

from __future__ import annotations

import contextlib
import select
import socket
import ssl
import struct
import time
from collections.abc import Callable, Iterable, Sequence
from typing import Any, Protocol

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion, MQTTProtocolVersion
from paho.mqtt.packettypes import PacketTypes
from paho.mqtt.properties import Properties
from paho.mqtt.reasoncodes import ReasonCode

from monitor.messages import SCHEMA
from monitor.plan import BrokerPlan

_ANSWER = 10.0  # seconds a broker has to answer our CONNECT
_PARTING = 1.0  # seconds it has to close the connection after our DISCONNECT
_CHUNK = 1 << 18
_PUBACK = struct.Struct("!BBH")
_DISCONNECT = b"\xe0\x00"


class Receiver(Protocol):
    """Who is told what the broker says."""

    def message(
        self, topic: str, payload: bytes, retain: bool, qos: int, packet: int, dup: bool
    ) -> None:
        """A message came."""

    def subscribed(self, session_present: bool) -> None:
        """All filters are granted: from now on readings reach us."""

    def taken(self, packet: int) -> None:
        """The broker has taken over what was published under this identifier."""


class _Corked:
    """A socket that reads ahead and writes when told to.

    paho asks for one byte, then one, then the rest, and writes packet by packet: three system calls
    to read a message and one to acknowledge it. Here both are shared by a whole batch.
    """

    def __init__(self, sock: socket.socket) -> None:
        self._sock = sock
        self._in = b""
        self._at = 0
        self._out = bytearray()
        self.dry = False
        """Whether the last read found nothing more to read."""
        self.full: Callable[[], bool] = lambda: False
        """Whether no more should be read now: paho reads many packets at a call where many of ours
        wait for an answer."""

    def recv(self, size: int) -> bytes:
        at = self._at
        if at >= len(self._in):
            if self.full():
                raise BlockingIOError
            self.dry = True  # unless this read brings something
            self._in = self._sock.recv(_CHUNK)
            self.dry = not self._in
            at = 0
        self._at = at + size
        return self._in[at : self._at]

    def send(self, data: bytes) -> int:
        self._out += data
        return len(data)

    def flush(self) -> None:
        """Write what is waiting, as much as the connection takes; OSError where it is lost."""
        while self._out:
            try:
                sent = self._sock.send(self._out)
            except (BlockingIOError, ssl.SSLWantWriteError, ssl.SSLWantReadError):
                return
            del self._out[:sent]

    @property
    def unsent(self) -> int:
        return len(self._out)

    def fileno(self) -> int:
        return self._sock.fileno()

    def setblocking(self, flag: bool) -> None:
        self._sock.setblocking(flag)

    def part(self, patience: float) -> None:
        """Write what is waiting and let the other side close; OSError where it does not in time.

        Whoever closes with something unread resets the connection, and what was written last, such
        as acknowledgements, may be lost with it.
        """
        deadline = time.monotonic() + patience
        self._sock.settimeout(patience)
        self._sock.sendall(self._out)
        while self._sock.recv(_CHUNK) and time.monotonic() < deadline:
            pass

    def close(self) -> None:
        self._sock.close()


class _Client(paho.Client):
    """paho's client over a connection that is there already."""

    corked: _Corked

    def _create_socket(self) -> Any:
        return self.corked


class Link:
    """A session on ``connection``, used until ``lost`` says why it ended."""

    def __init__(
        self,
        connection: socket.socket,
        broker: BrokerPlan,
        filters: Iterable[str],
        stale: Iterable[str],
        will: tuple[str, bytes],
        receiver: Receiver,
    ) -> None:
        self.lost: str | None = None
        self.accepted = False
        """Whether the broker has agreed to our CONNECT."""
        self.waiting = 0
        """Publications that the broker has not taken over yet."""
        self.last_packet = 0
        """Of the latest publication; 0 where there was none."""
        self._filters = list(filters)
        self._stale = list(stale)
        self._announced = False
        self._receiver = receiver
        self._session_present = False
        self._answer_by = time.monotonic() + _ANSWER
        connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        five = broker.protocol == "5"
        client = self._client = _Client(
            CallbackAPIVersion.VERSION2,
            client_id=broker.client_id,
            clean_session=None if five else False,
            protocol=MQTTProtocolVersion.MQTTv5 if five else MQTTProtocolVersion.MQTTv311,
            manual_ack=True,
            reconnect_on_failure=False,
        )
        self._described = _described(PacketTypes.PUBLISH) if five else None
        self._corked = client.corked = _Corked(connection)
        # Without a limit; with one, each word of the broker costs paho a search.
        client.max_inflight_messages_set(0)
        client.username_pw_set(broker.username, broker.password)
        last_words = _described(PacketTypes.WILLMESSAGE) if five else None
        client.will_set(*will, qos=1, retain=True, properties=last_words)
        # With this set paho leaves its packets in its queue until it is told to write.
        client.on_socket_register_write = _nothing
        client.on_connect = self._on_connect
        client.on_disconnect = self._on_disconnect
        client.on_subscribe = self._on_subscribe
        client.on_message = self._on_message
        client.on_publish = self._on_publish
        if five:
            session = _properties(PacketTypes.CONNECT)
            session.SessionExpiryInterval = broker.session_expiry
            client.connect(
                broker.host, broker.port, broker.keepalive, clean_start=False, properties=session
            )
        else:
            client.connect(broker.host, broker.port, broker.keepalive)

    def fileno(self) -> int:
        """For select."""
        return self._corked.fileno()

    @property
    def wants_write(self) -> bool:
        """Whether something waits for the connection to take more."""
        return self._client.want_write() or self._corked.unsent > 0

    def read(self, full: Callable[[], bool]) -> bool:
        """Hand on what has arrived, until nothing more or ``full()``; True where more may be."""
        client, corked = self._client, self._corked
        corked.dry, corked.full = False, full
        while not corked.dry and self.lost is None:
            if full():
                break
            client.loop_read()
        # Now, not after what takes long: what has just arrived says that the broker lives.
        client.loop_misc()
        if not self.accepted and time.monotonic() >= self._answer_by:
            self._end("the broker does not answer")
        return not corked.dry

    def acknowledge(self, packets: Sequence[int]) -> None:
        """Tell the broker that these messages are ours now.

        A PUBACK is four bytes in MQTT 3.1.1 and 5 alike (section 3.4), and there is one for each
        reading: written here, since paho takes a sixth of the whole path's time to queue them.
        """
        self._corked.send(b"".join([_PUBACK.pack(0x40, 2, packet) for packet in packets]))

    def subscribe(self, filters: Iterable[str], stale: Iterable[str]) -> None:
        """Ask for these filters, and for the stale ones no more: a session outlives both."""
        self._filters, stale = list(filters), list(stale)
        if self.accepted:
            self._client.subscribe([(topic, 1) for topic in self._filters])
            if stale:
                self._client.unsubscribe(stale)

    def publish(self, topic: str, payload: bytes, *, retain: bool = False) -> int:
        """Queue a message at QoS 1; the packet identifier that ``taken`` will name."""
        self.waiting += 1
        self.last_packet = self._client.publish(
            topic, payload, qos=1, retain=retain, properties=self._described
        ).mid
        return self.last_packet

    def write(self) -> None:
        """Write what is queued, as much as the connection takes."""
        if self.lost is not None:
            return
        try:
            self._client.loop_write()
            self._corked.flush()
        except OSError as error:
            self._end(f"the connection was lost: {error}")

    def close(self, patience: float) -> None:
        """Say goodbye, so that the broker does not publish the will.

        Before that, it has ``patience`` seconds to take over what was published.
        """
        deadline = time.monotonic() + patience
        self.write()
        while self.waiting and self.lost is None and time.monotonic() < deadline:
            select.select([self], [self] if self.wants_write else [], [], 0.05)
            self.read(lambda: time.monotonic() >= deadline)
            self.write()
        # By hand: paho would close at once.
        self._corked.send(_DISCONNECT)
        with contextlib.suppress(OSError):
            self._corked.part(_PARTING)
        self._corked.close()

    def drop(self) -> None:
        """Let go of the socket of a connection that is lost."""
        self._corked.close()

    def _end(self, why: str) -> None:
        if self.lost is None:
            self.lost = why

    def _on_connect(
        self, client: paho.Client, userdata: object, flags: Any, reason: ReasonCode, _: object
    ) -> None:
        if reason.is_failure:
            self._end(f"the broker refused the connection: {reason}")
            return
        self.accepted = True
        self._session_present = bool(flags.session_present)
        self.subscribe(self._filters, self._stale)

    def _on_subscribe(
        self, client: object, userdata: object, mid: int, reasons: list[ReasonCode], _: object
    ) -> None:
        refused = [t for t, r in zip(self._filters, reasons, strict=False) if r.is_failure]
        if refused:
            self._end(f"the broker refused the subscription to {', '.join(refused)}")
        elif not self._announced:
            self._announced = True
            self._receiver.subscribed(self._session_present)

    def _on_disconnect(
        self, client: object, userdata: object, flags: object, reason: ReasonCode, _: object
    ) -> None:
        self._end(f"the connection was lost: {reason}")

    def _on_message(self, client: object, userdata: object, message: paho.MQTTMessage) -> None:
        try:
            topic = message.topic
        except UnicodeDecodeError as error:
            # Taken as it can be read, and so told apart: refused, it would only be sent again.
            topic = error.object.decode(errors="backslashreplace")
        self._receiver.message(
            topic,
            bytes(message.payload),
            message.retain,
            message.qos,
            message.mid,
            message.dup,
        )

    def _on_publish(
        self, client: object, userdata: object, mid: int, reason: object, _: object
    ) -> None:
        self.waiting -= 1
        self._receiver.taken(mid)


def _described(packet: int) -> Properties:
    """What MQTT 5 tells of our payloads: the version of their schema, and that they are JSON."""
    properties = _properties(packet)
    properties.ContentType = "application/json"
    properties.PayloadFormatIndicator = 1
    properties.UserProperty = ("schema", str(SCHEMA))
    return properties


def _properties(packet: int) -> Properties:
    return Properties(packet)  # type: ignore[no-untyped-call]


def _nothing(client: object, userdata: object, sock: object) -> None:
    """Writing is the loop's business."""
