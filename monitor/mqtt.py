"""One connection to the broker, from connecting to its end; for the next, a new one is made.

Knows paho and sockets. Must not know what messages mean, or when to connect again.
"""

from __future__ import annotations

import contextlib
import socket
import struct
from collections.abc import Callable, Iterable, Sequence
from typing import Any, Protocol

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion
from paho.mqtt.reasoncodes import ReasonCode

from monitor.plan import BrokerPlan

CONNECT_TIMEOUT = 2.0
_CHUNK = 1 << 18


_PUBACK = struct.Struct("!BBH")


class Receiver(Protocol):
    """Who is told what the broker says."""

    def message(self, topic: str, payload: bytes, retain: bool, qos: int, packet: int) -> None:
        """A message came."""

    def subscribed(self, session_present: bool) -> None:
        """All filters are granted: from now on readings reach us."""

    def taken(self, packet: int) -> None:
        """The broker has taken over what was published under this identifier."""


class _Corked:
    """A socket that reads ahead and writes when told to.

    paho asks for one byte, then one, then the rest, and writes packet by packet: three system calls to
    read a message and one to acknowledge it. Here both are shared by a whole batch.
    """

    def __init__(self, sock: socket.socket) -> None:
        self._sock = sock
        self._in = b""
        self._at = 0
        self._out = bytearray()
        self.dry = False
        """Whether the last read found nothing more to read."""

    def recv(self, size: int) -> bytes:
        at = self._at
        if at >= len(self._in):
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
            except BlockingIOError:
                return
            del self._out[:sent]

    @property
    def unsent(self) -> int:
        return len(self._out)

    def pending(self) -> int:
        return max(0, len(self._in) - self._at)

    def fileno(self) -> int:
        return self._sock.fileno()

    def setblocking(self, flag: bool) -> None:
        self._sock.setblocking(flag)

    def close(self) -> None:
        with contextlib.suppress(OSError):
            self.flush()  # paho closes as soon as it has written its goodbye, which is still here
        self._sock.close()


class _Client(paho.Client):
    """paho's client over a corked socket, wrapped where paho wraps its own (TLS, WebSockets)."""

    corked: _Corked

    def _create_socket(self) -> Any:
        sock: Any = super()._create_socket()
        if isinstance(sock, socket.socket):
            sock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self.corked = _Corked(sock)
        return self.corked


class Link:
    """A connection: made when built (OSError where it cannot be), used until ``lost`` says why it ended."""

    def __init__(
        self,
        broker: BrokerPlan,
        filters: Iterable[str],
        will: tuple[str, bytes],
        receiver: Receiver,
    ) -> None:
        self.lost: str | None = None
        self._filters = list(filters)
        self._receiver = receiver
        self._session_present = False
        self._stopping = False
        client = self._client = _Client(
            CallbackAPIVersion.VERSION2,
            client_id=broker.client_id,
            clean_session=False,
            manual_ack=True,
            reconnect_on_failure=False,
        )
        client.max_inflight_messages_set(
            0
        )  # no limit, else each word of the broker costs paho a search
        client.connect_timeout = CONNECT_TIMEOUT
        client.username_pw_set(broker.username, broker.password)
        client.will_set(*will, qos=1, retain=True)
        # With this set paho leaves its packets in its queue until it is told to write.
        client.on_socket_register_write = _nothing
        client.on_connect = self._on_connect
        client.on_disconnect = self._on_disconnect
        client.on_subscribe = self._on_subscribe
        client.on_message = self._on_message
        client.on_publish = self._on_publish
        client.connect(broker.host, broker.port, broker.keepalive)
        self._corked = client.corked

    def fileno(self) -> int:
        """For select."""
        return self._corked.fileno()

    @property
    def wants_write(self) -> bool:
        """Whether something waits for the connection to take more."""
        return self._client.want_write() or self._corked.unsent > 0

    @property
    def unsent(self) -> int:
        """Bytes that the connection has not taken yet."""
        return self._corked.unsent

    def read(self, full: Callable[[], bool]) -> bool:
        """Hand on what has arrived, until nothing more or ``full()``; True where more may be there."""
        client, corked = self._client, self._corked
        corked.dry = False
        while not corked.dry and self.lost is None:
            if full():
                return True
            client.loop_read()
        return False

    def acknowledge(self, packets: Sequence[int]) -> None:
        """Tell the broker that these messages are ours now.

        A PUBACK is four bytes in MQTT 3.1.1 and 5 alike (section 3.4), and there is one for each
        reading: written here, since paho takes a sixth of the whole path's time to queue them.
        """
        self._corked.send(b"".join([_PUBACK.pack(0x40, 2, packet) for packet in packets]))

    def publish(self, topic: str, payload: bytes, *, retain: bool = False) -> int:
        """Queue a message at QoS 1; the packet identifier that ``taken`` will name."""
        return self._client.publish(topic, payload, qos=1, retain=retain).mid

    def write(self) -> None:
        """Write what is queued, and keep the connection alive. Call after ``read``: what arrived says
        that the broker lives, however long we were busy."""
        if self.lost is not None:
            return
        try:
            self._client.loop_write()
            self._corked.flush()
            self._client.loop_misc()
            self._client.loop_write()
            self._corked.flush()
        except OSError as error:
            self._end(str(error))

    def close(self) -> None:
        """Say goodbye, so that the broker does not publish the will."""
        self._stopping = True
        self._client.disconnect()
        self.write()

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
        self._session_present = bool(flags.session_present)
        client.subscribe([(topic, 1) for topic in self._filters])

    def _on_subscribe(
        self, client: object, userdata: object, mid: int, reasons: list[ReasonCode], _: object
    ) -> None:
        refused = [t for t, r in zip(self._filters, reasons, strict=False) if r.is_failure]
        if refused:
            self._end(f"the broker refused the subscription to {', '.join(refused)}")
        else:
            self._receiver.subscribed(self._session_present)

    def _on_disconnect(
        self, client: object, userdata: object, flags: object, reason: ReasonCode, _: object
    ) -> None:
        self._end("closed" if self._stopping else f"the connection was lost: {reason}")

    def _on_message(self, client: object, userdata: object, message: paho.MQTTMessage) -> None:
        self._receiver.message(
            message.topic, bytes(message.payload), message.retain, message.qos, message.mid
        )

    def _on_publish(
        self, client: object, userdata: object, mid: int, reason: object, _: object
    ) -> None:
        self._receiver.taken(mid)


def _nothing(client: object, userdata: object, sock: object) -> None:
    """Writing is the loop's business."""
