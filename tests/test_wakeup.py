"""Being woken (that signals do it, the daemon's tests show)."""

from __future__ import annotations

import socket
import time

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
