"""Average run lengths of the two-sided CUSUM, J. M. Lucas & R. B. Crosier 1982, Technometrics 24,
table 1: zero state and with a head start of half the decision interval. Values from memory.
"""

import pytest

from monitor.methods.runlength.cusum import run_length

SHIFTS = (0, 0.25, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4, 5)
PRINTED = {
    (4, 0.0): (168, 74.2, 26.6, 13.3, 8.38, 4.75, 3.34, 2.62, 2.19, 1.71, 1.31),
    (4, 0.5): (149, 62.7, 20.1, 8.97, 5.29, 2.86, 2.01, 1.59, 1.32, 1.07, 1.01),
    (5, 0.0): (465, 139, 38.0, 17.0, 10.4, 5.75, 4.01, 3.11, 2.57, 2.01, 1.69),
    (5, 0.5): (430, 122, 28.7, 11.2, 6.35, 3.37, 2.36, 1.86, 1.54, 1.16, 1.02),
}


@pytest.mark.parametrize(("h", "head_start"), PRINTED)
def test_within_half_a_percent_of_print(h: float, head_start: float) -> None:
    computed = [run_length(0.5, h, shift, head_start=head_start) for shift in SHIFTS]
    assert computed == pytest.approx(PRINTED[h, head_start], rel=0.005)


@pytest.mark.parametrize("h", [4, 5])
def test_both_directions_are_alike(h: float) -> None:
    for shift in SHIFTS:
        assert run_length(0.5, h, -shift) == pytest.approx(run_length(0.5, h, shift), rel=1e-12)
