"""Average run lengths of the two-sided EWMA with asymptotic limits, J. M. Lucas & M. S. Saccucci
1990, Technometrics 32 (S. V. Crowder 1987, Technometrics 29, has the integral equation): the five
schemes whose interval is 500. Values from memory.
"""

import pytest

from monitor.methods.runlength.ewma import run_length, width_for

SHIFTS = (0, 0.25, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4)
PRINTED = {
    (0.4, 3.054): (500, 224, 71.2, 28.4, 14.3, 5.9, 3.5, 2.5, 2.0, 1.4),
    (0.25, 2.998): (500, 170, 48.2, 20.1, 11.1, 5.5, 3.6, 2.7, 2.3, 1.7),
    (0.2, 2.962): (500, 150, 41.8, 18.2, 10.5, 5.5, 3.7, 2.9, 2.4, 1.9),
    (0.1, 2.814): (500, 106, 31.3, 15.9, 10.3, 6.1, 4.4, 3.4, 2.9, 2.2),
    (0.05, 2.615): (500, 84.1, 28.8, 16.4, 11.4, 7.1, 5.2, 4.2, 3.5, 2.7),
}


@pytest.mark.parametrize(("lam", "width"), PRINTED)
def test_within_half_a_percent_or_the_last_digit(lam: float, width: float) -> None:
    computed = [run_length(lam, width, shift, asymptotic=True) for shift in SHIFTS]
    assert computed == pytest.approx(PRINTED[lam, width], rel=0.005, abs=0.051)


@pytest.mark.parametrize(("lam", "width"), PRINTED)
def test_the_inverse_finds_the_printed_width(lam: float, width: float) -> None:
    assert width_for(lam, 500, asymptotic=True) == pytest.approx(width, abs=0.001)
