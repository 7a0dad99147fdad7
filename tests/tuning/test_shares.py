"""Parts of the promise: in the configuration a setting is tried for, they never add up to more."""

from __future__ import annotations

from typing import Any, get_args

import pytest
from hypothesis import given
from hypothesis import strategies as st

from replay.tuning.declared import Declared
from replay.tuning.shares import Role, configured_part, part, role

ROLES: tuple[Role, ...] = get_args(Role)


def detector(name: str, kind: str, chart: str, share: float = 1.0, side: Any = "both") -> Declared:
    return Declared(name, kind, chart, side, share, False, {})


SLOW = detector("slow", "ewma", "mean", 2.0)
FAST = detector("fast", "shewhart", "mean")
RANGE = detector("range", "shewhart", "range")
GROWN = detector("grown", "cusum", "variance", side="up")
SHRUNK = detector("shrunk", "cusum", "variance", side="down")


@pytest.mark.parametrize(
    ("own", "declared", "spread", "expected"),
    [
        ("small drifts", (), False, 1.0),  # alone, it has the whole
        ("small drifts", (SLOW,), False, 1.0),
        ("small drifts", (SLOW, FAST, RANGE), False, 2 / 4),
        ("small drifts", (RANGE,), False, 1 / 2),  # it joins, with the usual share of one
        ("small drifts", (SLOW,), True, 2 / 3),  # one for the spread is to join as well
        ("small drifts", (SLOW, GROWN), True, 2 / 3),
        ("large drifts", (SLOW, FAST), False, 1 / 3),
        ("spread", (SLOW, GROWN), True, 1 / 3),
        ("spread", (RANGE,), True, 1 / 3),  # one for the mean is to join as well
        ("spread", (SLOW, SHRUNK), True, 1 / 4),
    ],
)
def test_the_part_of_one(
    own: Role, declared: tuple[Declared, ...], spread: bool, expected: float
) -> None:
    assert part(own, declared, spread) == pytest.approx(expected)


def test_what_is_configured_has_its_share_of_all() -> None:
    assert configured_part("slow", (SLOW, FAST, RANGE)) == 0.5
    assert configured_part("range", (SLOW, FAST, RANGE)) == 0.25


def test_a_shrinking_spread_is_replaced_by_none() -> None:
    assert role("cusum", "variance", "down") is None
    assert role("cusum", "variance", "both") is None
    assert role("cusum", "variance", "up") == "spread"


@given(
    st.lists(
        st.builds(
            detector,
            st.uuids().map(str),
            st.sampled_from(["cusum", "ewma", "shewhart"]),
            st.sampled_from(["mean", "variance", "range"]),
            st.floats(0.1, 10),
            st.sampled_from(["up", "down", "both"]),
        ),
        max_size=6,
    )
)
def test_parts_never_add_up_to_more_than_the_promise(declared: list[Declared]) -> None:
    """One for small drifts and one for the spread are put in; what stays keeps its share of all
    that is then written."""
    new = {"small drifts": 0.0, "spread": 0.0}
    kept = 0.0
    for each in declared:
        own = role(each.kind, each.chart, each.side)
        if own in new:
            new[own] += each.share
        else:
            kept += each.share
    written = kept + sum(share or 1.0 for share in new.values())
    rates = sum(part(own, declared, spread=True) for own in ROLES if own in new)
    assert rates + kept / written <= 1 + 1e-9
