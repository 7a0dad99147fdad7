"""Being woken (that signals do it, the daemon's tests show)."""

from __future__ import annotations

import select

from monitor.wakeup import Wakeup


def is_awake(wakeup: Wakeup) -> bool:
    return bool(select.select([wakeup], [], [], 0)[0])


def test_wakes_until_it_is_seen_to() -> None:
    wakeup = Wakeup()
    assert not is_awake(wakeup)
    wakeup.clear()  # nothing to clear: no harm, no wait
    wakeup()
    assert is_awake(wakeup)
    wakeup.clear()
    assert not is_awake(wakeup)


def test_never_waits_itself() -> None:
    wakeup = Wakeup()
    for _ in range(10_000):
        wakeup()
    assert is_awake(wakeup)
    for _ in range(10_000):
        wakeup.clear()
    assert not is_awake(wakeup)
