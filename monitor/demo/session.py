"""The daemon at work on the simulated line: its process, its configuration, and what it says.

Knows MQTT and processes. Must not know what the line sends or what an alert means.
"""

from __future__ import annotations

import contextlib
import json
import secrets
import subprocess
import sys
import threading
import time
from collections.abc import Callable
from importlib import resources
from pathlib import Path
from queue import Empty, SimpleQueue
from string import Template
from types import TracebackType

import paho.mqtt.client as mqtt
from paho.mqtt.enums import CallbackAPIVersion

from monitor.demo.broker import PACKAGES
from monitor.entries import Message
from monitor.journal import open_reader, read_entries
from monitor.messages import AlertEvent, CountsField, HealthMessage

PATIENCE = 15.0  # seconds for the broker's answer, and for the daemon to start, catch up or end
_LAST_WORDS = 2.0  # seconds


class SessionError(Exception):
    """The demo cannot go on; the text says why and what to do."""


class Session:
    """``driftbell run`` on a broker, watched by a client of our own, for one ``with`` block.

    ``folder`` receives the configuration, the journal and the daemon's log, and keeps them. The
    broker keeps nothing: retained messages and the daemon's session are removed at the end.
    """

    def __init__(self, folder: Path, host: str, port: int, prefix: str) -> None:
        self.configuration = folder / "jar-line-2.yaml"
        self.journal = folder / "jar-line-2.db"
        self.log = folder / "daemon.log"
        self._address = host, port
        self._root = f"{prefix}/monitor"
        self._daemon_id = f"driftbell-demo-{secrets.token_hex(4)}"
        template = resources.files("monitor.demo").joinpath("jar-line-2.yaml").read_text("utf-8")
        self.configuration.write_text(
            Template(template).substitute(
                host=json.dumps(host), port=port, client_id=self._daemon_id, prefix=prefix
            ),
            "utf-8",
        )
        self._daemon: subprocess.Popen[bytes] | None = None
        self._said: SimpleQueue[AlertEvent] = SimpleQueue()
        self._retained: set[str] = set()
        self._health = threading.Condition()
        self._last_health: HealthMessage | None = None
        self._answered = threading.Event()
        self._refusal = ""
        client = mqtt.Client(CallbackAPIVersion.VERSION2)
        client.max_inflight_messages_set(1000)
        client.on_connect = self._on_connect
        client.on_subscribe = lambda *_: self._answered.set()
        client.on_message = self._on_message
        self._client = client

    def _on_connect(
        self, client: mqtt.Client, _user: object, _flags: object, reason: object, _p: object
    ) -> None:
        if getattr(reason, "is_failure", False):
            self._refusal = str(reason)
            self._answered.set()
        else:
            client.subscribe(f"{self._root}/#", qos=1)

    def _on_message(self, _c: object, _u: object, message: mqtt.MQTTMessage) -> None:
        kind = message.topic.removeprefix(f"{self._root}/").split("/")[0]
        if kind in ("health", "standing"):
            self._retained.add(message.topic)
        if kind == "alert":
            self._said.put(json.loads(message.payload))
        elif kind == "health" and message.payload:
            with self._health:
                self._last_health = json.loads(message.payload)
                self._health.notify_all()

    def __enter__(self) -> Session:
        try:
            self._connect()
            self._start_daemon()
        except BaseException:
            self.close()
            raise
        return self

    def _connect(self) -> None:
        host, port = self._address
        try:
            self._client.connect(host, port)
        except OSError as error:
            raise SessionError(
                f"no broker answers at {host}:{port} ({error}): is it running, and on that port?"
            ) from None
        self._client.loop_start()
        if not self._answered.wait(PATIENCE):
            raise SessionError(f"what listens at {host}:{port} does not answer as an MQTT broker")
        if self._refusal:
            raise SessionError(
                f"the broker at {host}:{port} refused us: {self._refusal}. "
                "The demo gives no user name: use a broker that lets anyone in"
            )

    def _start_daemon(self) -> None:
        with self.log.open("ab") as log:
            self._daemon = subprocess.Popen(
                [sys.executable, "-m", "monitor", "run", str(self.configuration)],
                stdin=subprocess.DEVNULL,
                stdout=log,
                stderr=log,
                cwd=PACKAGES,
            )
        self._await_health("start", lambda health: health["online"])

    def _await_health(self, what: str, condition: Callable[[HealthMessage], bool]) -> None:
        deadline = time.monotonic() + PATIENCE
        with self._health:
            while self._last_health is None or not condition(self._last_health):
                self.check()
                if time.monotonic() > deadline:
                    raise SessionError(
                        f"the daemon did not {what} within {PATIENCE:.0f} s{self._tail()}"
                    )
                self._health.wait(0.1)

    def check(self) -> None:
        """SessionError where the daemon's process has ended."""
        status = None if self._daemon is None else self._daemon.poll()
        if status is not None:
            raise SessionError(f"the daemon ended with status {status}{self._tail()}")

    def _tail(self) -> str:
        lines = self.log.read_text("utf-8", "replace").splitlines()[-15:]
        return "".join([f"; its log, {self.log}, ends with", *(f"\n  {line}" for line in lines)])

    def publish(self, message: Message) -> None:
        """Send one message of the line, QoS 1."""
        self._client.publish(message.topic, message.payload, qos=1)

    def event(self, timeout: float) -> AlertEvent | None:
        """The next alert event; None where none comes within ``timeout`` seconds."""
        try:
            return self._said.get(timeout=max(timeout, 0.0))
        except Empty:
            return None

    @property
    def counts(self) -> CountsField | None:
        """The daemon's counts as last published."""
        with self._health:
            return None if self._last_health is None else self._last_health["counts"]

    def await_read(self, messages: int) -> None:
        """Wait until the daemon's journal holds ``messages``; SessionError where it does not."""
        deadline = time.monotonic() + PATIENCE
        with contextlib.closing(open_reader(self.journal)) as journal:
            while (read := sum(isinstance(e, Message) for e in read_entries(journal))) < messages:
                if time.monotonic() > deadline:
                    raise SessionError(
                        f"the daemon read only {read} of {messages} messages{self._tail()}"
                    )
                self.check()
                time.sleep(0.05)

    def close(self) -> None:
        """End the daemon, and leave nothing of ours at the broker."""
        if self._daemon is not None:
            self._daemon.terminate()
            try:
                self._daemon.wait(PATIENCE)
            except subprocess.TimeoutExpired:
                self._daemon.kill()
                self._daemon.wait()
            with self._health:  # its last words have the final counts
                self._health.wait_for(self._is_offline, _LAST_WORDS)
        if self._client.is_connected():
            for topic in self._retained:
                self._client.publish(topic, b"", qos=1, retain=True).wait_for_publish(PATIENCE)
            self._discard_daemon_session()
        self._client.disconnect()
        self._client.loop_stop()

    def _is_offline(self) -> bool:
        return self._last_health is None or not self._last_health["online"]

    def _discard_daemon_session(self) -> None:
        gone = threading.Event()
        client = mqtt.Client(
            CallbackAPIVersion.VERSION2, client_id=self._daemon_id, clean_session=True
        )
        client.on_connect = lambda *_: gone.set()
        client.connect(*self._address)
        client.loop_start()
        gone.wait(PATIENCE)
        client.disconnect()
        client.loop_stop()

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        self.close()
