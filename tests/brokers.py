"""Real brokers, a plain MQTT client and the real daemon, for tests that run the whole thing.

Knows how to start, stop, kill and restart them, and how to wait for what they do: on conditions,
never for a time. Must not know what a test wants to see.
"""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Self

import paho.mqtt.client as mqtt
import yaml
from paho.mqtt.enums import CallbackAPIVersion

from monitor.demo.broker import HOST, EmbeddedBroker, await_listening, free_port

TIMEOUT = 20.0  # seconds; only a failing test waits as long


def mosquitto_path() -> str | None:
    """The mosquitto program: on PATH, or where Debian keeps it for root."""
    return shutil.which("mosquitto", path=f"{os.environ.get('PATH', os.defpath)}:/usr/sbin")


class Embedded:
    """The broker of the ``demo`` extra: its sessions live as long as its process."""

    def __init__(self, folder: Path) -> None:
        self.log = folder / "embedded-broker.log"
        self._broker = EmbeddedBroker(self.log)
        self.port = self._broker.port

    def start(self) -> None:
        """Start it, and return once it accepts connections."""
        self._broker.start()

    def stop(self) -> None:
        """End it; harmless where it does not run."""
        self._broker.stop()

    kill = stop  # it has nothing to save, so an orderly end and a killing are one


class Mosquitto:
    """mosquitto with its persistence in ``folder``; ``options`` become lines of its configuration.

    An orderly ``stop`` saves sessions, queues and retained messages; ``kill`` loses what came since
    the last save.
    """

    def __init__(self, folder: Path, **options: object) -> None:
        path = mosquitto_path()
        assert path is not None, "mosquitto is not on PATH: apt-get install mosquitto"
        self.port = free_port()
        self.log = folder / "mosquitto.log"
        self.configuration = folder / "mosquitto.conf"
        self._command = [path, "-c", str(self.configuration)]
        self._process: subprocess.Popen[bytes] | None = None
        store = folder / "mosquitto"
        store.mkdir()
        settings: dict[str, object] = {
            "listener": f"{self.port} {HOST}",
            "allow_anonymous": "true",
            "persistence": "true",
            "persistence_location": f"{store}/",
            "max_queued_messages": 0,
            "log_dest": "stderr",
            "user": "root",  # as whoever runs the tests; only root can give its rights up
        }
        lines = [f"{key} {value}" for key, value in {**settings, **options}.items()]
        self.configuration.write_text("\n".join(lines) + "\n")

    def start(self) -> None:
        """Start it, and return once it accepts connections."""
        with self.log.open("ab") as log:
            self._process = subprocess.Popen(
                self._command, stdin=subprocess.DEVNULL, stdout=log, stderr=log
            )
        assert await_listening(self._process, self.port), self.log.read_text()

    def stop(self) -> None:
        """End it in order; harmless where it does not run."""
        self._end(signal.SIGTERM)

    def kill(self) -> None:
        """End it as a power cut would."""
        self._end(signal.SIGKILL)

    def _end(self, number: signal.Signals) -> None:
        if self._process is not None:
            self._process.send_signal(number)
            self._process.wait(TIMEOUT)
            self._process = None


Broker = Embedded | Mosquitto


@dataclass(frozen=True, slots=True)
class Received:
    """One message as it came; ``retained`` tells what the broker kept from what is new."""

    topic: str
    payload: bytes
    qos: int
    retained: bool

    @property
    def body(self) -> dict[str, object]:
        """The payload as a JSON object."""
        body = json.loads(self.payload)
        assert isinstance(body, dict)
        return body


class Client:
    """A plain client that collects what it receives; use it in a ``with`` block."""

    def __init__(self, port: int, client_id: str = "", *, clean: bool = True) -> None:
        self._port = port
        self._arrival = threading.Condition()
        self._received: list[Received] = []
        self._granted: set[int] = set()
        self._connected = False
        self.session_present = False
        client = mqtt.Client(CallbackAPIVersion.VERSION2, client_id=client_id, clean_session=clean)
        client.max_inflight_messages_set(1000)
        client.on_connect = self._on_connect
        client.on_subscribe = self._on_subscribe
        client.on_message = self._on_message
        self._client = client

    def _on_connect(self, _c: object, _u: object, flags: mqtt.ConnectFlags, *_: object) -> None:
        with self._arrival:
            self.session_present = flags.session_present
            self._connected = True
            self._arrival.notify_all()

    def _on_subscribe(self, _c: object, _u: object, identifier: int, *_: object) -> None:
        with self._arrival:
            self._granted.add(identifier)
            self._arrival.notify_all()

    def _on_message(self, _c: object, _u: object, message: mqtt.MQTTMessage) -> None:
        with self._arrival:
            self._received.append(
                Received(message.topic, message.payload, message.qos, message.retain)
            )
            self._arrival.notify_all()

    def _await(
        self, condition: Callable[[], bool], what: str, while_: Callable[[], bool] = lambda: True
    ) -> None:
        deadline = time.monotonic() + TIMEOUT
        with self._arrival:
            while not condition():
                if not while_() or time.monotonic() > deadline:
                    count, last = len(self._received), self._received[-5:]
                    lines = "".join(f"\n  {m.topic} {m.payload[:300]!r}" for m in last)
                    raise AssertionError(f"did not come: {what}; of {count} messages:{lines}")
                self._arrival.wait(0.1)  # woken by what comes; the bound is for ``while_``

    def connect(self) -> Self:
        """Connect, and return once the broker has agreed."""
        self._client.connect(HOST, self._port, keepalive=60)
        self._client.loop_start()
        self._await(lambda: self._connected, "connected")
        return self

    def disconnect(self) -> None:
        """Leave in order; a session that is not clean stays at the broker."""
        self._client.disconnect()
        self._client.loop_stop()
        self._connected = False

    def __enter__(self) -> Self:
        return self.connect()

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        self.disconnect()

    def subscribe(self, *filters: str, qos: int = 1) -> None:
        """Subscribe, and return once the broker has granted it."""
        _, identifier = self._client.subscribe([(filter_, qos) for filter_ in filters])
        assert identifier is not None
        self._await(lambda: identifier in self._granted, f"subscribed to {filters}")

    def publish(
        self, topic: str, payload: bytes | str, *, qos: int = 1, retain: bool = False
    ) -> None:
        """Publish one message, and return once the broker has it."""
        self.publish_all([(topic, payload)], qos=qos, retain=retain)

    def publish_all(
        self, messages: Iterable[tuple[str, bytes | str]], *, qos: int = 1, retain: bool = False
    ) -> None:
        """Publish messages in order, and return once the broker has them all."""
        tokens = [self._client.publish(t, p, qos=qos, retain=retain) for t, p in messages]
        deadline = time.monotonic() + TIMEOUT + len(tokens) / 1000
        for token in tokens:
            token.wait_for_publish(max(deadline - time.monotonic(), 0.0))
            assert token.is_published(), "the broker did not acknowledge everything published"

    def received(self, topic: str = "#") -> list[Received]:
        """What has come so far on topics that match the filter, oldest first."""
        with self._arrival:
            return [m for m in self._received if mqtt.topic_matches_sub(topic, m.topic)]

    def wait_for(
        self,
        condition: Callable[[Sequence[Received]], bool],
        topic: str = "#",
        while_: Callable[[], bool] = lambda: True,
    ) -> list[Received]:
        """Wait until ``condition`` holds of all that came on ``topic``; returns those messages.

        Fails when it takes too long, and at once when ``while_`` no longer holds.
        """

        # A full list for every message would make waiting for many messages quadratic.
        matching: list[Received] = []
        seen = 0

        def holds() -> bool:
            nonlocal seen
            new, seen = self._received[seen:], len(self._received)
            matching.extend(m for m in new if mqtt.topic_matches_sub(topic, m.topic))
            return condition(matching)

        self._await(holds, f"what the test waits for on {topic}", while_)
        return matching


def is_online(message: Received, *, online: bool = True) -> bool:
    """Whether this health message says so."""
    return message.body.get("online") is online


class Daemon:
    """``driftbell run`` as a process of its own, with ``configuration`` in ``folder``."""

    def __init__(self, folder: Path, port: int, configuration: dict[str, object]) -> None:
        self._port = port
        self.log = folder / "daemon.log"
        self.configuration = folder / "driftbell.yaml"
        given = configuration.get("broker")
        broker = {"host": HOST, "port": port, "client_id": "driftbell-test"}
        merged = {**configuration, "broker": broker | (given if isinstance(given, dict) else {})}
        self.configuration.write_text(yaml.safe_dump(merged, allow_unicode=True, sort_keys=False))
        outputs = configuration["outputs"]
        assert isinstance(outputs, dict)
        self.root = str(outputs["root"])
        self.process: subprocess.Popen[bytes] | None = None

    def command(self) -> list[str]:
        """What starts it."""
        return [sys.executable, "-m", "monitor", "run", str(self.configuration)]

    def start(self) -> None:
        """Start it, and return once it has said ``online: true``, which it says when subscribed."""
        with Client(self._port) as watcher:
            watcher.subscribe(f"{self.root}/health")
            with self.log.open("ab") as log:
                self.process = subprocess.Popen(
                    self.command(),
                    stdin=subprocess.DEVNULL,
                    stdout=log,
                    stderr=log,
                )
            process = self.process
            try:
                watcher.wait_for(
                    lambda ms: any(not m.retained and is_online(m) for m in ms),
                    while_=lambda: process.poll() is None,
                )
            except AssertionError as error:
                log = self.log.read_text()
                raise AssertionError(f"{error}\nthe daemon's log:\n{log}") from None

    def stop(self) -> int:
        """Ask it to end (SIGTERM); returns its exit status."""
        return self._end(signal.SIGTERM)

    def kill(self) -> None:
        """End it as a power cut would."""
        self._end(signal.SIGKILL)

    def _end(self, number: signal.Signals) -> int:
        assert self.process is not None
        self.process.send_signal(number)
        status = self.process.wait(TIMEOUT)
        self.process = None
        return status
