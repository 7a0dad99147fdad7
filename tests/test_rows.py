"""Entries as rows and back."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import characteristic

from monitor import rows
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Message,
    Recorded,
    Started,
    Tick,
)
from monitor.plan import Plan

times = st.integers(-(2**62), 2**62)
recorded: st.SearchStrategy[Recorded] = st.one_of(
    st.builds(
        Message,
        times,
        st.text(max_size=6),
        st.binary(max_size=20),
        st.booleans(),
        st.integers(0, 2),
        st.integers(0, 65_535),
    ),
    st.builds(Started, times),
    st.builds(Connected, times, st.booleans()),
    st.builds(Disconnected, times),
    st.builds(Tick, times),
    st.builds(Configured, times, st.sampled_from([Plan(()), Plan((characteristic(),))])),
)


@given(st.lists(recorded))
def test_what_goes_in_comes_out(entries: list[Recorded]) -> None:
    numbers: dict[str, int] = {}

    def number_of(topic: str) -> int:
        return numbers.setdefault(topic, len(numbers))

    made = list(rows.rows(entries, number_of))
    topics = {number: topic for topic, number in numbers.items()}
    read = [
        rows.entry(time, kind, None if number is None else topics[number], payload, flags)
        for time, kind, number, payload, flags in made
    ]
    assert read == entries
    assert all(flags < 2**63 for *_, flags in made)


@pytest.mark.parametrize(
    "row",
    [
        (1, 99, None, None, 0),
        (1, rows.MESSAGE, None, b"1", 1),
        (1, rows.MESSAGE, "a", None, 1),
        (1, 5, None, None, 0),
        (1, 5, None, b'{"is": "Nothing"}', 0),
    ],
)
def test_what_another_version_wrote_is_refused(
    row: tuple[int, int, str | None, bytes | None, int],
) -> None:
    with pytest.raises(ValueError):
        rows.entry(*row)
