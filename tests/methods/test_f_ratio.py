"""The F distribution against scipy, and the analysis of variance of groups."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.methods.f_ratio import compare, f_cdf, f_sf


@given(
    st.floats(1e-3, 1e3),
    st.floats(0.5, 1e5) | st.integers(1, 300_000),
    st.floats(0.5, 1e5) | st.integers(1, 300_000),
)
def test_both_tails_are_those_of_scipy(ratio: float, above: float, below: float) -> None:
    reference = stats.f(above, below)

    assert f_sf(ratio, above, below) == pytest.approx(reference.sf(ratio), rel=1e-6, abs=1e-12)
    assert f_cdf(ratio, above, below) == pytest.approx(reference.cdf(ratio), rel=1e-6, abs=1e-12)


def test_nothing_and_everything() -> None:
    assert f_sf(0.0, 3, 4) == 1
    assert f_sf(float("inf"), 3, 4) == 0
    assert f_sf(float("nan"), 3, 4) == 1


def test_groups_are_compared_as_scipy_compares_them() -> None:
    chance = np.random.default_rng(1)
    groups = [chance.normal(mean, 1, 40) for mean in (0, 0.3, 0.6)]
    found = compare(
        np.full(3, 40.0),
        np.array([group.mean() for group in groups]),
        np.array([group.var(ddof=1) for group in groups]),
    )
    reference = stats.f_oneway(*groups)

    assert found is not None
    assert found.ratio == pytest.approx(reference.statistic)
    assert found.p == pytest.approx(reference.pvalue)


def test_groups_whose_values_follow_each_other_count_for_less() -> None:
    counts, means, variances = np.full(3, 400.0), np.array([0, 0.1, 0.2]), np.ones(3)
    alone, following = compare(counts, means, variances), compare(counts, means, variances, 4.0)

    assert alone is not None
    assert following is not None
    assert following.ratio == pytest.approx(alone.ratio / 4)
    assert alone.p < 0.05 < following.p


def test_one_group_compares_with_nothing() -> None:
    assert compare(np.array([5.0]), np.zeros(1), np.ones(1)) is None
    assert compare(np.array([5.0, 5.0]), np.zeros(2), np.zeros(2)) is None
