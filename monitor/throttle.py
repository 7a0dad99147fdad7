"""What is said at once, and what is said at most once in a while.

Knows keys, marks and an instant that it is told. Must not know what is said or how it is sent.
"""

from __future__ import annotations

from typing import Generic, TypeVar

Key = TypeVar("Key")


class Throttle(Generic[Key]):
    """Decides when a key is due: at once where its mark changed, else ``interval`` after the last time.

    Times are whatever unit the caller uses, all alike.
    """

    __slots__ = ("_interval", "_pending", "_said")

    def __init__(self, interval: int) -> None:
        self._interval = interval
        self._said: dict[Key, tuple[int, object]] = {}
        self._pending: dict[Key, None] = {}

    def touch(self, key: Key, mark: object, now: int) -> bool:
        """Something changed; True where it should be said now, else it is kept until it is due.

        ``mark`` is what deserves being said at once when it differs from the last said.
        """
        said = self._said.get(key)
        if said is None or said[1] != mark or now - said[0] >= self._interval:
            self._said[key] = (now, mark)
            self._pending.pop(key, None)
            return True
        self._pending[key] = None
        return False

    def due(self, now: int) -> list[Key]:
        """Kept keys whose time has come; they count as said."""
        keys = [key for key in self._pending if now - self._said[key][0] >= self._interval]
        for key in keys:
            del self._pending[key]
            self._said[key] = (now, self._said[key][1])
        return keys
