"""What ends the daemon's wait before its time: a signal to stop, or a thread that has news.

Knows signals and a pair of sockets. Must not know what is waited for.
"""

from __future__ import annotations

import contextlib
import select
import signal
import socket
from typing import Protocol


class Waitable(Protocol):
    """What else may end a wait."""

    @property
    def wants_write(self) -> bool:
        """Whether it waits for writing, too."""

    def fileno(self) -> int:
        """For select."""


class Wakeup:
    """Waits; call it from a thread to be woken."""

    def __init__(self) -> None:
        self.stopping = False
        """Whether the process was told to end."""
        self._reloading = False
        self._reader, self._writer = socket.socketpair()
        self._reader.setblocking(False)
        self._writer.setblocking(False)

    def on_signals(self) -> None:
        """Let SIGTERM and SIGINT wake us and ask us to stop, SIGHUP to read the configuration."""
        signal.set_wakeup_fd(self._writer.fileno(), warn_on_full_buffer=False)
        for number in (signal.SIGTERM, signal.SIGINT):
            signal.signal(number, self._stop)
        signal.signal(signal.SIGHUP, self._reload)

    def __call__(self) -> None:
        # Where nothing more fits, a wake-up is waiting already.
        with contextlib.suppress(BlockingIOError):
            self._writer.send(b"\0")

    def is_stopping(self) -> bool:
        """Whether the process was told to end."""
        return self.stopping

    def take_reload(self) -> bool:
        """Whether it was told, since this was last asked, to read its configuration again."""
        reloading, self._reloading = self._reloading, False
        return reloading

    def wait(self, link: Waitable | None, timeout: float) -> None:
        """Until ``link`` can be read or written, we are woken, or ``timeout`` seconds are over."""
        reading: list[socket.socket | Waitable] = [self._reader]
        writing: list[Waitable] = []
        if link is not None:
            reading.append(link)
            if link.wants_write:
                writing.append(link)
        ready, _, _ = select.select(reading, writing, [], timeout)
        if self._reader in ready:
            with contextlib.suppress(BlockingIOError):
                self._reader.recv(4096)

    def _reload(self, *_: object) -> None:
        self._reloading = True

    def _stop(self, *_: object) -> None:
        self.stopping = True
