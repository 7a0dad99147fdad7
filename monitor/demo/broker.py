"""An embedded MQTT broker in a process of its own, for the demo and the tests.

Knows how to start the broker that comes with the ``demo`` extra, and when it accepts connections.
Must not know what is published on it.
"""

from __future__ import annotations

import contextlib
import importlib.util
import logging
import os
import random
import signal
import socket
import subprocess
import sys
import threading
import time
from pathlib import Path
from types import TracebackType

HOST = "127.0.0.1"
PACKAGES = Path(__file__).parents[2]
"""Where ``monitor`` is imported from: children start here, so that nothing in the user's own folder
is imported in its place."""
MAX_PAYLOAD = 1 << 20  # bytes; the broker's own default, 20 KiB, would drop the publisher


class BrokerError(Exception):
    """The embedded broker cannot be had here; the text says what to do."""


def free_port() -> int:
    """A TCP port nobody listens on at ``HOST``.

    Taken below the range that outgoing connections get their ports from: a client that keeps trying
    to reach a broker while it restarts could otherwise be given the broker's own port.
    """
    for port in random.sample(range(20_000, 32_000), 100):
        with socket.socket() as probe, contextlib.suppress(OSError):
            probe.bind((HOST, port))
            return port
    raise BrokerError(f"no free TCP port between 20000 and 32000 on {HOST}")


def await_listening(process: subprocess.Popen[bytes], port: int, timeout: float = 10.0) -> bool:
    """True once ``port`` accepts a connection, False when the process ended or took too long."""
    deadline = time.monotonic() + timeout
    while time.monotonic() < deadline:
        with contextlib.suppress(OSError):
            socket.create_connection((HOST, port), timeout=1.0).close()
            return process.poll() is None
        with contextlib.suppress(subprocess.TimeoutExpired):
            process.wait(0.02)
            return False
    return False


class EmbeddedBroker:
    """A broker at ``HOST``:``port`` for as long as the ``with`` block lasts; it logs to ``log``."""

    def __init__(self, log: Path, port: int | None = None) -> None:
        if importlib.util.find_spec("iotcore") is None:
            raise BrokerError(
                "the embedded broker is not installed: run pip install 'driftbell[demo]', "
                "or give a broker of your own with --broker HOST:PORT"
            )
        self.port = free_port() if port is None else port
        self._log = log
        self.process: subprocess.Popen[bytes] | None = None

    def start(self) -> None:
        """Start it and wait until it accepts connections; BrokerError where it does not."""
        with self._log.open("ab") as log:
            self.process = subprocess.Popen(
                [sys.executable, "-m", "monitor.demo.broker", str(self.port)],
                stdin=subprocess.PIPE,  # the broker ends when this closes, however we end
                stdout=log,
                stderr=log,
                cwd=PACKAGES,
            )
        if not await_listening(self.process, self.port):
            self.stop()
            raise BrokerError(
                f"the embedded broker did not start on port {self.port}; its log is {self._log}. "
                "Give a broker of your own with --broker HOST:PORT"
            )

    def stop(self) -> None:
        """End the broker's process and wait for it; its sessions and retained messages go too."""
        if self.process is None:
            return
        self.process.kill()  # it keeps nothing, so there is nothing to put in order
        self.process.wait()
        assert self.process.stdin is not None
        self.process.stdin.close()
        self.process = None

    def __enter__(self) -> EmbeddedBroker:
        self.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        self.stop()


def _end_with_parent() -> None:
    sys.stdin.buffer.read()
    os._exit(0)


def main(port: int) -> None:
    """Be the broker: serve ``HOST``:``port`` until standard input closes."""
    from iotcore import Broker

    # Control-C on a terminal reaches every process; the broker stays until the others have left.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    # The broker reports each packet as an error unless told otherwise.
    logging.basicConfig(level=logging.WARNING)
    logging.getLogger("rumqttd").setLevel(logging.CRITICAL)
    threading.Thread(target=_end_with_parent, daemon=True).start()
    Broker(port=port, listen=HOST, max_payload_size=MAX_PAYLOAD).run_forever()


if __name__ == "__main__":
    main(int(sys.argv[1]))
