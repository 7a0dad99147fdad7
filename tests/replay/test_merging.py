"""Several recordings as one stream."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.entries import Parsed
from replay.merging import in_order
from replay.recordings import Chunk, Opened, Recording


@pytest.fixture(scope="module")
def recordings(tmp_path_factory: pytest.TempPathFactory) -> list[Recording]:
    """Files by whose names the tests tell where an entry comes from."""
    folder = tmp_path_factory.mktemp("recordings")
    for name in "abc":
        (folder / f"{name}.jsonl").touch()
    return [Recording(str(folder / f"{name}.jsonl")) for name in "abc"]


Entries = list[int | None]
"""Arrivals; None is a line that is no entry."""


def chunks(recording: Recording, arrivals: Entries, size: int) -> Iterator[Chunk]:
    for at in range(0, len(arrivals), size):
        held = [None if t is None else Parsed(t, "a", None) for t in arrivals[at : at + size]]
        yield Chunk(recording, at + 1, list(held))


def name(recording: Recording) -> str:
    return Path(recording.path).stem


def played(opened: list[Opened]) -> list[tuple[str, int, int]]:
    """(file, line, arrival) in the order in which they are played."""
    return [
        (name(chunk.recording), number, entry.time)
        for chunk in in_order(opened)
        for number, entry in enumerate(chunk.entries, chunk.first)
        if entry is not None
    ]


def naive(files: list[tuple[str, Entries]]) -> list[tuple[str, int, int]]:
    """Every entry counts as arriving no earlier than those before it in its file; then sorted."""
    keyed = []
    for place, (file, arrivals) in enumerate(files):
        latest = -1
        for number, arrival in enumerate(arrivals, 1):
            if arrival is not None:
                latest = max(latest, arrival)
                keyed.append(((latest, place, number), (file, number, arrival)))
    return [entry for _, entry in sorted(keyed)]


@given(
    st.lists(st.lists(st.none() | st.integers(0, 30), max_size=25), min_size=1, max_size=3),
    st.integers(1, 8),
)
def test_by_arrival_then_by_file_and_a_file_keeps_its_order(
    recordings: list[Recording], arrivals: list[Entries], size: int
) -> None:
    files = list(zip(recordings, arrivals, strict=False))
    opened = [Opened(chunks(recording, times, size)) for recording, times in files]
    assert played(opened) == naive([(name(recording), times) for recording, times in files])


def test_tables_without_times_follow_one_another(recordings: list[Recording]) -> None:
    a, b, c = recordings
    clock = iter(range(100))

    def timeless(recording: Recording) -> Iterator[Chunk]:
        for at in range(0, 4, 2):
            yield Chunk(recording, at + 1, [Parsed(next(clock), "a", None) for _ in range(2)])

    opened = [Opened(timeless(b), False), Opened(chunks(a, [3, 6], 1)), Opened(timeless(c), False)]
    assert played(opened) == [
        *[("b", 1, 0), ("b", 2, 1), ("b", 3, 2), ("a", 1, 3), ("b", 4, 3)],
        *[("c", 1, 4), ("c", 2, 5), ("a", 2, 6), ("c", 3, 6), ("c", 4, 7)],
    ]


def test_one_recording_is_left_as_it_is(recordings: list[Recording]) -> None:
    held = list(chunks(recordings[0], [5, 3, None, 4], 3))
    assert list(in_order([Opened(iter(held))])) == held
