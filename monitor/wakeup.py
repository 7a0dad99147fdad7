"""What ends the daemon's wait before its time: a signal to stop, or a thread that has news.

Knows signals and a pair of sockets. Must not know what is waited for.
"""

from __future__ import annotations

import contextlib
import signal
import socket


class Wakeup:
    """Give it to select; call it from a thread to be woken."""

    def __init__(self) -> None:
        self.stopping = False
        """Whether the process was told to end."""
        self._reader, self._writer = socket.socketpair()
        self._reader.setblocking(False)
        self._writer.setblocking(False)

    def on_signals(self) -> None:
        """Let SIGTERM and SIGINT wake us, and ask us to stop."""
        signal.set_wakeup_fd(self._writer.fileno(), warn_on_full_buffer=False)
        for number in (signal.SIGTERM, signal.SIGINT):
            signal.signal(number, self._stop)

    def __call__(self) -> None:
        # Where nothing more fits, a wake-up is waiting already.
        with contextlib.suppress(BlockingIOError):
            self._writer.send(b"\0")

    def clear(self) -> None:
        """What woke us is being seen to."""
        with contextlib.suppress(BlockingIOError):
            self._reader.recv(4096)

    def fileno(self) -> int:
        """For select."""
        return self._reader.fileno()

    def _stop(self, *_: object) -> None:
        self.stopping = True
