"""Being woken, by a thread or by a signal."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import time

import pytest

from monitor.wakeup import Wakeup

SHORT, LONG = 0.01, 30.0


class End:
    """One end of a connection."""

    def __init__(self, end: socket.socket, wants_write: bool) -> None:
        self._end = end
        self.wants_write = wants_write

    def fileno(self) -> int:
        return self._end.fileno()


def wait(wakeup: Wakeup, link: End | None = None) -> bool:
    """Whether the wait ended before its time."""
    began = time.monotonic()
    wakeup.wait(link, LONG)
    return time.monotonic() - began < LONG / 2


def test_a_call_ends_one_wait() -> None:
    wakeup = Wakeup()
    wakeup()
    assert wait(wakeup)
    began = time.monotonic()
    wakeup.wait(None, SHORT)
    assert time.monotonic() - began >= SHORT


def test_calls_never_wait_themselves() -> None:
    wakeup = Wakeup()
    for _ in range(10_000):
        wakeup()
    assert wait(wakeup)


def test_a_connection_ends_it_when_it_can_be_read_or_written() -> None:
    wakeup = Wakeup()
    near, far = socket.socketpair()
    assert wait(wakeup, End(near, wants_write=True))
    far.send(b"x")
    assert wait(wakeup, End(near, wants_write=False))


HANDLES = """
import sys
from monitor.wakeup import Wakeup

wakeup = Wakeup()
wakeup.on_signals()
print("ready", flush=True)
wakeup.wait(None, 60.0)
print(wakeup.is_stopping(), wakeup.take_reload(), wakeup.take_reload(), flush=True)
"""


@pytest.mark.parametrize(
    ("number", "said"),
    [
        (signal.SIGTERM, b"True False False"),
        (signal.SIGINT, b"True False False"),
        (signal.SIGHUP, b"False True False"),
    ],
)
def test_a_signal_ends_it_and_is_remembered(number: signal.Signals, said: bytes) -> None:
    command = [sys.executable, "-c", HANDLES]
    with subprocess.Popen(command, stdout=subprocess.PIPE) as process:
        assert process.stdout is not None
        assert process.stdout.readline() == b"ready\n"
        os.kill(process.pid, number)
        assert process.stdout.readline().strip() == said
        assert process.wait(20) == 0
