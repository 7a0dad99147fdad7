"""The tabular CUSUM, against its sums worked out anew from the whole history at every point.

Values, k, h and starts are multiples of 1/8, so that no sum is rounded and "beyond" is exact.
"""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import fresh, rules, steps, subgroup

from monitor.plan import CusumPlan, Side


def eighths(low: float, high: float) -> st.SearchStrategy[float]:
    return st.integers(int(8 * low), int(8 * high)).map(lambda n: n / 8)


series = st.lists(eighths(-6, 6), min_size=1, max_size=40)


def upper_sum(inputs: list[float], start: float) -> float:
    """The largest of 0, what any tail of the inputs adds up to, and the start with all of them.

    That is the sum of E. S. Page 1954, without his recursion; ``inputs`` are already less k.
    """
    return max(0.0, start + sum(inputs), *(sum(inputs[i:]) for i in range(len(inputs))))


def naive(
    values: list[float], k: float, h: float, start: float, hold: bool
) -> list[tuple[float, bool]]:
    """(upper sum, whether it signals) at each value."""
    found, since = [], 0
    for end in range(1, len(values) + 1):
        value = upper_sum([z - k for z in values[since:end]], start)
        found.append((value, value > h))
        if value > h and not hold:
            since = end
    return found


@given(
    series,
    eighths(0, 2),
    eighths(0.125, 6),
    st.sampled_from([0.0, 0.25, 0.5, 0.875]),
    st.booleans(),
    st.sampled_from([None, 2.5, 4.0]),
)
def test_both_sums_are_what_their_definition_says(
    values: list[float], k: float, h: float, head_start: float, hold: bool, clip: float | None
) -> None:
    cusum = fresh(CusumPlan("individual", k, h, head_start, clip, hold))
    inputs = [z if clip is None else min(max(z, -clip), clip) for z in values]
    upper = naive(inputs, k, h, head_start * h, hold)
    lower = naive([-z for z in inputs], k, h, head_start * h, hold)
    for number, value in enumerate(values):
        signals = cusum.step(subgroup(value, number=number + 1))
        rows = cusum.rows("it", signals)
        assert [(row.statistic, row.value, bool(row.rules)) for row in rows] == [
            ("upper_sum", *upper[number]),
            ("lower_sum", *lower[number]),
        ]
        assert (
            rules(signals)
            == ["cusum-upper"] * upper[number][1] + ["cusum-lower"] * (lower[number][1])
        )


@given(series, st.sampled_from(["up", "down"]))
def test_one_direction_is_half_of_both(values: list[float], direction: Side) -> None:
    both = steps(fresh(CusumPlan("individual", 0.5, 3.0)), values)
    one = steps(fresh(CusumPlan("individual", 0.5, 3.0, direction=direction)), values)
    assert one == [tuple(s for s in each if s.direction == direction) for each in both]


def test_a_sum_at_its_limit_does_not_signal() -> None:
    cusum = fresh(CusumPlan("individual", 0.5, 5.0))
    assert steps(cusum, [5.5]) == [()]
    assert rules(cusum.step(subgroup(0.625))) == ["cusum-upper"]


def test_only_the_side_that_signalled_goes_to_its_head_start() -> None:
    cusum = fresh(CusumPlan("individual", 0.0, 4.0, head_start=0.5))
    assert steps(cusum, [-1.0]) == [()]  # sums 1 and 3
    signals = cusum.step(subgroup(-2.0))  # sums 0 and 5
    assert [row.value for row in cusum.rows("it", signals)] == [0.0, 5.0]
    cusum.step(subgroup(0.0))
    assert [row.value for row in cusum.rows("it", ())] == [0.0, 2.0]


def test_after_a_signal_hold_keeps_summing() -> None:
    cusum = fresh(CusumPlan("individual", 0.5, 4.0, hold=True))
    assert [len(each) for each in steps(cusum, [5.0, 1.0, 0.5, -0.5, -1.0])] == [1, 1, 1, 0, 0]


def test_sums_and_limit_are_shown_in_the_unit() -> None:
    # Standard error of a mean of four: √(0.3² + 0.8²/4) = 0.5.
    plan = CusumPlan("mean", 0.5, 4.0)
    cusum = fresh(plan, mean=100.0, sigma=0.8, sigma_between=0.3)
    (signal,) = cusum.step(subgroup(102.5, 102.5, 102.5, 102.5))
    assert signal.value == pytest.approx((5 - 0.5) * 0.5)
    assert signal.upper == pytest.approx(4.0 * 0.5)
    assert (signal.lower, signal.statistic, signal.direction) == (None, "upper_sum", "up")


def test_a_subgroup_of_another_size_has_its_own_standard_error() -> None:
    cusum = fresh(CusumPlan("mean", 0.5, 4.0), sigma=2.0)
    cusum.step(subgroup(2.0, 2.0, 2.0, 2.0))  # two standard errors of 1
    cusum.step(subgroup(*[2.0] * 16))  # four standard errors of 0.5
    upper, _ = cusum.rows("it", ())
    assert upper.value / 0.5 == pytest.approx((2 - 0.5) + (4 - 0.5))


def test_restarting_forgets_and_shows_nothing() -> None:
    cusum = fresh(CusumPlan("individual", 0.5, 4.0, head_start=0.5))
    cusum.step(subgroup(2.0))
    cusum.restart()
    assert cusum.rows("it", ()) == ()
    cusum.step(subgroup(0.0))
    assert [row.value for row in cusum.rows("it", ())] == [1.5, 1.5]


@given(st.lists(st.floats(-1e100, 1e100), min_size=1, max_size=20), st.booleans())
def test_absurd_values_leave_the_sums_numbers(values: list[float], hold: bool) -> None:
    cusum = fresh(CusumPlan("individual", 0.5, 5.0, hold=hold), sigma=1e-100)
    for value in values:
        signals = cusum.step(subgroup(value))
        assert all(math.isfinite(row.value) for row in cusum.rows("it", signals))
