"""``driftbell`` with one cut: the process kills itself when it passes a place for the n-th time.

    python tests/faults/cuts.py PLACE N run CONFIG

Knows the places between two steps of which a crash must lose nothing, and names them. The product
has no part in this: its methods are wrapped here.
"""

from __future__ import annotations

import functools
import os
import signal
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[2]))

from monitor.__main__ import main
from monitor.journal import Journal
from monitor.keeper import Keeper
from monitor.mqtt import Link
from monitor.pipeline import Pipeline

Condition = Callable[..., bool]


def _before(owner: type, name: str, passes: Condition, left: list[int]) -> None:
    """Die before the call of a method whose arguments meet the condition, for the n-th time."""
    method = getattr(owner, name)

    @functools.wraps(method)
    def wrapped(self: Any, *args: Any, **named: Any) -> Any:
        if passes(self, *args, **named):
            _pass(left)
        return method(self, *args, **named)

    setattr(owner, name, wrapped)


def _pass(left: list[int]) -> None:
    left[0] -= 1
    if left[0] <= 0:
        os.kill(os.getpid(), signal.SIGKILL)


def _is_alert(_: Link, topic: str, *args: object, **named: object) -> bool:
    return "/alert/" in topic


def _acknowledges(_: Link, packets: list[int]) -> bool:
    return bool(packets)


def _has_written(link: Link, topic: str, *args: object, **named: object) -> bool:
    """An alert follows, and the acknowledgements before it have left."""
    if _is_alert(link, topic):
        link.write()
        return True
    return False


def _was_alert(pipeline: Pipeline, packet: int) -> bool:
    return packet in pipeline.outbox._sent


def _in_commit(left: list[int], condition: str) -> None:
    """Die in the n-th transaction that wrote a table, before it is over."""
    initialise = Journal.__init__

    @functools.wraps(initialise)
    def wrapped(self: Journal, path: Path) -> None:
        initialise(self, path)
        wrote: list[bool] = []

        def trace(statement: str) -> None:
            if condition in statement:
                wrote.append(True)
            elif statement == "COMMIT" and wrote:
                wrote.clear()
                _pass(left)

        self.db.set_trace_callback(trace)

    Journal.__init__ = wrapped  # type: ignore[method-assign]


PLACES: dict[str, Callable[[list[int]], None]] = {
    "before-commit": lambda left: _in_commit(left, "INTO entries"),
    "before-commit-of-a-snapshot": lambda left: _in_commit(left, "INTO state"),
    "commit-to-acknowledgement": lambda left: _before(Link, "acknowledge", _acknowledges, left),
    "commit-to-publication": lambda left: _before(Link, "publish", _is_alert, left),
    "acknowledgement-to-publication": lambda left: _before(Link, "publish", _has_written, left),
    "publication-to-its-acknowledgement": lambda left: _before(Pipeline, "taken", _was_alert, left),
    "farewell": lambda left: _before(Keeper, "settle", lambda *_: True, left),
}

if __name__ == "__main__":
    place, times = sys.argv[1:3]
    PLACES[place]([int(times)])
    sys.exit(main(sys.argv[3:]))
