"""Topic filters: names for levels, and filters that meet."""

from __future__ import annotations

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.filters import overlap, parse


def test_named_levels_become_wildcards() -> None:
    assert parse("plant/{line}/scale/{head}/#") == (
        "plant/+/scale/+/#",
        ((1, "line"), (3, "head")),
    )


@pytest.mark.parametrize("text", ["a", "/", "+", "#", "+/b/#", "$SYS/broker", "a//b", "{x}"])
def test_what_is_a_filter(text: str) -> None:
    assert parse(text).topic == text.replace("{x}", "+")


@pytest.mark.parametrize(
    "text",
    [
        "",
        "a/{b",
        "a/b}",
        "a/x{b}",
        "a/{b}{c}",
        "a/{}",
        "a/{b c}",
        "a/{4}",
        "a/{b}/{b}",
        "a+/b",
        "a/#/b",
        "a/b#",
        "$share/group/a",
        "a\0b",
        "a\nb",
        "é" * 40_000,
    ],
)
def test_what_is_none(text: str) -> None:
    with pytest.raises(ValueError):
        parse(text)


@pytest.mark.parametrize(
    ("one", "two", "meet"),
    [
        ("a/b", "a/b", True),
        ("a/b", "a/c", False),
        ("a/+", "a/b", True),
        ("a/+", "+/b", True),
        ("a/+", "b/+", False),
        ("a/+", "a/b/c", False),
        ("a/#", "a", True),  # MQTT 3.1.1, 4.7.1.2: # includes the parent level
        ("a/#", "a/b/c", True),
        ("a/+/#", "a", False),
        ("a/+/#", "a/b", True),
        ("#", "a/b", True),
        ("#", "$SYS/x", False),  # MQTT 3.1.1, 4.7.2
        ("+/x", "$SYS/x", False),
        ("$SYS/#", "$SYS/x", True),
        ("+/b/c", "a/#", True),
        ("a//b", "a/+/b", True),
        ("/a", "+/a", True),
    ],
)
def test_overlap(one: str, two: str, meet: bool) -> None:
    assert overlap(one, two) is overlap(two, one) is meet


LEVELS = st.lists(st.sampled_from(["a", "b", "", "+"]), min_size=1, max_size=4)
FILTERS = st.builds(
    lambda levels, rest: "/".join([*levels, "#"] if rest else levels), LEVELS, st.booleans()
)


def matches(topic: list[str], pattern: str) -> bool:
    """Section 4.7 as it is written, for topics without a leading $."""
    levels = pattern.split("/")
    if levels[-1] == "#":
        levels = levels[:-1]
        topic = topic[: len(levels)]
    return len(topic) == len(levels) and all(
        p in ("+", t) for t, p in zip(topic, levels, strict=True)
    )


TOPICS = [list(t) for n in range(1, 6) for t in itertools.product(("a", "b", ""), repeat=n)]


@given(FILTERS, FILTERS)
def test_filters_meet_where_some_topic_matches_both(one: str, two: str) -> None:
    meet = any(matches(topic, one) and matches(topic, two) for topic in TOPICS)
    assert overlap(one, two) is meet
