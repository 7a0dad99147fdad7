"""What an object remembers between entries, given out and taken back as JSON.

Knows attribute names. Must not know what any of them means. Whoever remembers something names it in
``_memory``; what the plan says is not remembered, it is built again.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, ClassVar


class Remembers:
    """Gives and takes the attributes in ``_memory``, which are JSON values as they stand."""

    __slots__ = ()
    _memory: ClassVar[tuple[str, ...]] = ()

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        return [_own(getattr(self, name)) for name in self._memory]

    def restore(self, state: Sequence[Any]) -> None:
        """Remember what ``state`` gave; ValueError where it is not of this kind."""
        for name, value in zip(self._memory, state, strict=True):
            setattr(self, name, _own(value))


def _own(value: Any) -> Any:
    # What is remembered goes on changing; what was given out or taken in does not.
    return list(value) if isinstance(value, list) else value
