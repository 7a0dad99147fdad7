"""Where a series is cut, against a naive search over every cut."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.methods.split import split


@given(st.lists(st.integers(-50, 50), min_size=2, max_size=40).filter(lambda v: len(set(v)) > 1))
def test_no_other_cut_explains_more(values: list[int]) -> None:
    series = np.array(values, float)
    found = split(series)
    assert found is not None

    def left(at: int) -> float:
        parts = series[:at], series[at:]
        return float(sum(((part - part.mean()) ** 2).sum() for part in parts))

    whole = float(((series - series.mean()) ** 2).sum())
    assert left(found.index) == pytest.approx(min(map(left, range(1, len(values)))), abs=1e-6)
    assert found.share == pytest.approx(1 - left(found.index) / whole, abs=1e-9)
    before, after = series[: found.index], series[found.index :]
    assert found.by == pytest.approx(after.mean() - before.mean(), abs=1e-9)


@pytest.mark.parametrize("values", [[], [1.0], [2.0, 2.0, 2.0]])
def test_where_nothing_varies_there_is_no_cut(values: list[float]) -> None:
    assert split(np.array(values)) is None
