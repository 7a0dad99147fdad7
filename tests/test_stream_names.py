"""Streams as text: what is written can be read back, and what is no stream is refused."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.stream_names import name, parse

KEYS = st.from_regex(r"\A[A-Za-z][A-Za-z0-9_-]{0,5}\Z")


@given(st.dictionaries(KEYS, st.text(st.characters(codec="utf-8")), min_size=1, max_size=4))
def test_what_is_written_can_be_read_back(values: dict[str, str]) -> None:
    stream = tuple(sorted(values.items()))
    assert parse(name(stream)) == stream


@pytest.mark.parametrize(
    ("text", "stream"),
    [
        ("head=4;lane=1", (("head", "4"), ("lane", "1"))),
        ("lane=1;head=4", (("head", "4"), ("lane", "1"))),
        ("head=", (("head", ""),)),
        ("head=a=b", (("head", "a=b"),)),
        ("head=a%3bb%3Dc%25", (("head", "a;b=c%"),)),
        ("head=%C3%BC", (("head", "ü"),)),
    ],
)
def test_streams(text: str, stream: tuple[tuple[str, str], ...]) -> None:
    assert parse(text) == stream


@pytest.mark.parametrize(
    ("text", "wrong"),
    [
        ("", "no stream"),
        ("4", "no stream"),
        ("head:4", "no stream"),
        ("=4", "no stream"),
        ("4=4", "no stream"),
        ("head=4;", "no stream"),
        ("head=4; lane=1", "no stream"),
        ("head=1;head=2", "twice"),
        ("head=100%", "hexadecimal"),
        ("head=%4", "hexadecimal"),
        ("head=%FF", "UTF-8"),
    ],
)
def test_what_is_no_stream(text: str, wrong: str) -> None:
    with pytest.raises(ValueError, match=wrong):
        parse(text)
