"""A cable between a client and a broker that can be cut.

Knows sockets and one thread. Must not know what runs through it.
"""

from __future__ import annotations

import contextlib
import select
import socket
import struct
import threading
from types import TracebackType
from typing import Self

from monitor.demo.broker import HOST

_RESET = struct.pack("ii", 1, 0)  # close at once, and throw away what is under way
_FEW = 4096


class Cable:
    """Forwards connections to ``port`` of the broker while the block lasts."""

    def __init__(self, port: int) -> None:
        self._broker = port
        self._listener = socket.create_server((HOST, 0))
        self.port: int = self._listener.getsockname()[1]
        self._told, self._tell = socket.socketpair()
        self._pairs: dict[socket.socket, socket.socket] = {}
        self._near: set[socket.socket] = set()
        self._holding = False
        self._lock = threading.Lock()
        self._thread = threading.Thread(target=self._run)

    def hold(self) -> None:
        """Bring nothing from the client to the broker any more, until the next cut."""
        self._holding = True
        self._tell.send(b"\0")

    def cut(self) -> None:
        """End all that runs through it, whatever is under way."""
        with self._lock:
            self._holding = False
            for end in self._pairs:
                end.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, _RESET)
                end.close()
            self._pairs.clear()
        self._tell.send(b"\0")

    def __enter__(self) -> Self:
        self._thread.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        self._tell.close()
        self._thread.join()
        self._listener.close()
        self.cut_quietly()

    def cut_quietly(self) -> None:
        """Let go of the ends."""
        for end in self._pairs:
            end.close()

    def _run(self) -> None:
        while True:
            with self._lock:
                ends = [end for end in self._pairs if not (self._holding and end in self._near)]
            with contextlib.suppress(ValueError, OSError):  # cut while it was listed
                ready, _, _ = select.select([self._told, self._listener, *ends], [], [])
                for end in ready:
                    if end is self._told:
                        if not self._told.recv(_FEW):
                            return
                    elif end is self._listener:
                        self._join(self._listener.accept()[0])
                    else:
                        self._forward(end)

    def _join(self, near: socket.socket) -> None:
        far = socket.create_connection((HOST, self._broker))
        with self._lock:
            self._pairs |= {near: far, far: near}
            self._near.add(near)

    def _forward(self, end: socket.socket) -> None:
        with self._lock:
            other = self._pairs.get(end)
            if other is None:
                return
            data = end.recv(_FEW)
            if data:
                other.sendall(data)
                return
            for each in (end, other):
                del self._pairs[each]
                each.close()
