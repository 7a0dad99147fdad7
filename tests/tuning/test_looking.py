"""A stream in few points."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.times import SECOND
from replay.readings import StreamReadings
from replay.tuning.looking import outline, part, streams
from replay.tuning.running import Running


def made(time: np.ndarray, value: np.ndarray, stream: str = "1") -> StreamReadings:
    return StreamReadings((("head", stream),), time, value, np.empty(0, np.int64))


def test_an_outline_follows_the_readings() -> None:
    rng = np.random.default_rng(1)
    time = np.concatenate([np.arange(50_000), np.arange(150_000, 200_000)]) * SECOND
    value = rng.normal(0, 1, 100_000) + time / time[-1]
    found = outline(made(time, value))
    assert len(found.times) == 100  # half of two hundred stretches hold none
    assert sorted(found.times) == list(found.times)
    middle = np.array(found.times) / time[-1]
    assert found.mean == pytest.approx(middle, abs=0.2)
    assert np.subtract(found.high, found.mean) == pytest.approx(2.33, abs=0.5)  # normal, 99 %
    assert np.subtract(found.low, found.mean) == pytest.approx(-2.33, abs=0.5)


def test_only_so_many_streams_are_drawn() -> None:
    time = np.arange(10) * SECOND
    found = streams([made(time, time * 1.0, str(head)) for head in range(60)])
    assert [bool(each.outline.times) for each in found] == [True] * 50 + [False] * 10
    assert {each.readings for each in found} == {10}
    assert found[3].stream == "head=3"


def test_parts_hold_their_ends() -> None:
    time = np.arange(100) * SECOND
    held = [made(time, time * 1.0), made(time + 500_000, time * 1.0)]
    running = Running(held)
    found = part(held, running, 10 * SECOND, 20 * SECOND)
    assert (found.readings, found.running) == (21, 10.0)
    assert part(held, running, running.first, running.last).readings == 200
