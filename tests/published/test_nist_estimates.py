"""Estimates on worked examples of the NIST/SEMATECH e-Handbook of Statistical Methods."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.methods.estimates import components, moving_range_sigma
from monitor.methods.f_ratio import f_sf


def test_flow_rates_as_individuals() -> None:
    """6.3.2.2: mean 50.81, mean moving range 1.8778; with d2 rounded to 1.128 the limits are
    printed as 45.8159 and 55.8041, with d2 from its definition they are 45.8176 and 55.8024."""
    rates = np.array([49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1])
    sigma = moving_range_sigma(rates, np.zeros(10, np.bool_))

    assert rates.mean() == pytest.approx(50.81)
    assert rates.mean() - 3 * sigma == pytest.approx(45.8176, abs=5e-5)
    assert rates.mean() + 3 * sigma == pytest.approx(55.8024, abs=5e-5)
    assert sigma == pytest.approx(1.8778 / 1.128, rel=1e-3)


def test_three_levels_of_one_factor() -> None:
    """7.4.3.3 (data and table from memory): mean squares 13.949 between and 1.454 within, with 2
    and 12 degrees of freedom, F 9.59."""
    levels = np.array(
        [
            [6.9, 5.4, 5.8, 4.6, 4.0],
            [8.3, 6.8, 7.8, 9.2, 6.5],
            [8.0, 10.5, 8.1, 6.9, 9.3],
        ]
    )
    found = components(np.full(3, 5), levels.mean(axis=1), levels.var(axis=1, ddof=1))

    assert found is not None
    assert (found.between_freedom, found.within_freedom) == (2, 12)
    assert found.between == pytest.approx(13.949, abs=5e-4)
    assert found.within == pytest.approx(1.454, abs=5e-4)
    assert found.ratio == pytest.approx(9.59, abs=5e-3)
    assert f_sf(found.ratio, 2, 12) == pytest.approx(0.00325, abs=5e-6)


@pytest.mark.parametrize(
    ("above", "below", "five_percent"),
    [(1, 10, 4.965), (2, 12, 3.885), (5, 20, 2.711), (10, 100, 1.927)],
)
def test_the_table_of_f(above: int, below: int, five_percent: float) -> None:
    """1.3.6.7.3, upper critical values of the F distribution at 5 % (from memory)."""
    assert f_sf(five_percent, above, below) == pytest.approx(0.05, abs=5e-5)
