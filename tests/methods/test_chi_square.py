"""The chi-squared distribution, by scipy's."""

import numpy as np
import pytest
from scipy import integrate, stats

from monitor.methods import chi_square

FREEDOMS = [1, 2, 3, 4, 24, 999]


@pytest.mark.parametrize("freedom", FREEDOMS)
def test_both_tails(freedom: int) -> None:
    for quantile in (1e-12, 1e-3, 0.5, 0.999, 1 - 1e-9):
        x = float(stats.chi2.ppf(quantile, freedom))
        assert chi_square.cdf(x, freedom) == pytest.approx(stats.chi2.cdf(x, freedom), rel=1e-11)
        assert chi_square.sf(x, freedom) == pytest.approx(stats.chi2.sf(x, freedom), rel=1e-11)
    assert chi_square.sf(0.0, freedom) == 1
    assert chi_square.cdf(0.0, freedom) == 0


@pytest.mark.parametrize("freedom", [*FREEDOMS, 9_999])
@pytest.mark.parametrize("p", [0.9999, 0.5, 0.1, 1e-3, 1e-10, 1e-25])
def test_points(freedom: int, p: float) -> None:
    upper, lower = chi_square.upper_point(p, freedom), chi_square.lower_point(p, freedom)
    assert upper == pytest.approx(stats.chi2.isf(p, freedom), rel=1e-9)
    assert lower == pytest.approx(stats.chi2.ppf(p, freedom), rel=1e-9)


def test_printed_points() -> None:
    """R. A. Fisher's table of percentage points, as printed everywhere; from memory."""
    printed = {(1, 0.05): 3.841, (4, 0.05): 9.488, (4, 0.01): 13.277, (10, 0.001): 29.588}
    for (freedom, p), value in printed.items():
        assert chi_square.upper_point(p, freedom) == pytest.approx(value, abs=0.0006)
    assert chi_square.lower_point(0.05, 4) == pytest.approx(0.711, abs=0.0006)


@pytest.mark.parametrize("freedom", [1, 2, 5, 40])
def test_partial_means_are_integrals_of_the_tails(freedom: int) -> None:
    x = np.array([0.0, 0.3, 1.0, 1.9])
    above, below = chi_square.mean_above(x, freedom), chi_square.mean_below(x, freedom)
    for at, over, under in zip(x, above, below, strict=True):
        whole = integrate.quad(lambda t: stats.chi2.sf(t * freedom, freedom), at, np.inf)[0]
        part = integrate.quad(lambda t: stats.chi2.cdf(t * freedom, freedom), 0, at)[0]
        assert over == pytest.approx(whole, rel=1e-7)
        assert under == pytest.approx(part, rel=1e-7, abs=1e-12)
