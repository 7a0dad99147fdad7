"""Beside a running daemon: a command that takes only what the daemon leaves of the processor.

Knows priorities and pauses. Must not know what the command does.
"""

from __future__ import annotations

import math
import os
import time
from collections.abc import Iterable, Iterator
from typing import TypeVar

T = TypeVar("T")

_WORK = 50e-6  # seconds
_REST = 100e-6
_LOWEST = 19


class Background:
    """Called now and then by whoever works long: rests briefly when it is time to.

    A commit ends with a wait for the disk. If its processor is taken meanwhile, the daemon waits
    for the end of a time slice, which is as long as ten commits. The lowest priority spares it that
    only where the system weighs both processes against each other: many weigh sessions and services
    first. A nap gives the processor back everywhere; with naps, work takes four times as long, so
    where there is no daemon it ``rests`` not.
    """

    def __init__(self, *, rests: bool) -> None:
        os.nice(_LOWEST)
        self._until = 0.0 if rests else math.inf

    def __call__(self) -> None:
        """Let others go first, where we have worked for long enough."""
        if time.perf_counter() >= self._until:
            time.sleep(_REST)
            self._until = time.perf_counter() + _WORK

    def through(self, items: Iterable[T]) -> Iterator[T]:
        """The items, with a rest between them where it is time for one."""
        for item in items:
            yield item
            self()
