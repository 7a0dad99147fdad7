"""Times and counts in words."""

from __future__ import annotations

import pytest

from monitor.configuration import spans


@pytest.mark.parametrize(
    ("value", "said"),
    [
        (0.0, "0"),
        (0.0001, "almost 0"),
        (0.174, "0.17"),
        (3.0, "3"),
        (14.4, "14"),
        (370.4, "370"),
        (1_039_999.0, "1,040,000"),
        (3.2e18, "3.2e+18"),
    ],
)
def test_number(value: float, said: str) -> None:
    assert spans.number(value) == said


@pytest.mark.parametrize(
    ("seconds", "said"),
    [(0.5, "0.5 s"), (119.0, "119 s"), (150.0, "2.5 min"), (1_800.0, "30 min"), (14_400.0, "4 h")],
)
def test_short(seconds: float, said: str) -> None:
    assert spans.short(seconds) == said


@pytest.mark.parametrize(
    ("seconds", "said"),
    [
        (9.3, "9.3 s"),
        (2_280.0, "38 min"),
        (9_000.0, "2.5 h"),
        (165_600.0, "46 h"),
        (518_400.0, "6 days"),
        (3e7, "347 days"),
        (1e8, "3.2 years"),
        (3.1e10, "982 years"),
        (1e12, "over 1,000 years"),
    ],
)
def test_long(seconds: float, said: str) -> None:
    assert spans.long(seconds) == said


def test_what_comes_too_seldom_to_be_seen_comes_practically_never() -> None:
    each, things = " in each stream", "subgroups"
    assert spans.once(518_400.0, each, 3e5, things) == (
        "once in 6 days in each stream (300,000 subgroups)"
    )
    assert spans.once(3.1e10, "", 9e9, things) == "once in 982 years (9,000,000,000 subgroups)"
    said = "practically never (over 1,000 years in each stream)"
    assert spans.once(3.2e10, each, 9e9, things) == said
    assert spans.once_among(9e11, things) == "once in 900,000,000,000 subgroups"
    said = "practically never (over 1,000,000,000,000 subgroups)"
    assert spans.once_among(1e197, things) == said
