"""Constants of ISO 7870-2 for subgroups of 2 to 25: from their definitions, independently, and as
printed.

The printed values are from memory: the same table stands in every handbook of the trade.
"""

import math

import pytest
from scipy import integrate, special, stats

from monitor.methods.constants import c4, c5, d2, d3
from monitor.methods.limits import range_limits, sd_limits

# n: (A2, A3, B3, B4, D3, D4, c4, d2)
PRINTED = {
    2: (1.880, 2.659, 0, 3.267, 0, 3.267, 0.7979, 1.128),
    3: (1.023, 1.954, 0, 2.568, 0, 2.574, 0.8862, 1.693),
    4: (0.729, 1.628, 0, 2.266, 0, 2.282, 0.9213, 2.059),
    5: (0.577, 1.427, 0, 2.089, 0, 2.114, 0.9400, 2.326),
    6: (0.483, 1.287, 0.030, 1.970, 0, 2.004, 0.9515, 2.534),
    7: (0.419, 1.182, 0.118, 1.882, 0.076, 1.924, 0.9594, 2.704),
    8: (0.373, 1.099, 0.185, 1.815, 0.136, 1.864, 0.9650, 2.847),
    9: (0.337, 1.032, 0.239, 1.761, 0.184, 1.816, 0.9693, 2.970),
    10: (0.308, 0.975, 0.284, 1.716, 0.223, 1.777, 0.9727, 3.078),
    25: (0.153, 0.606, 0.565, 1.435, 0.459, 1.541, 0.9896, 3.931),
}


@pytest.mark.parametrize("n", PRINTED)
def test_printed_to_the_last_digit(n: int) -> None:
    a2, a3, b3, b4, lower, upper, printed_c4, printed_d2 = PRINTED[n]
    spread, sd = range_limits(n, 1.0, 3), sd_limits(n, 1.0, 3)
    # Tables were computed from rounded constants: half a unit of the last digit and a hair.
    near = {"abs": 0.00105}
    assert 3 / (d2(n) * math.sqrt(n)) == pytest.approx(a2, **near)
    assert 3 / (c4(n) * math.sqrt(n)) == pytest.approx(a3, **near)
    assert sd.lower / sd.centre == pytest.approx(b3, **near)
    assert sd.upper / sd.centre == pytest.approx(b4, **near)
    assert spread.lower / spread.centre == pytest.approx(lower, **near)
    assert spread.upper / spread.centre == pytest.approx(upper, **near)
    assert c4(n) == pytest.approx(printed_c4, abs=5.1e-5)
    assert d2(n) == pytest.approx(printed_d2, abs=5.1e-4)


@pytest.mark.parametrize("n", range(2, 26))
def test_standard_deviation_by_independent_integration(n: int) -> None:
    """(n − 1)s² is chi-squared: the mean and the spread of its root, integrated."""
    chi = stats.chi(n - 1)
    mean, _ = integrate.quad(lambda x: x * chi.pdf(x), 0, 40, epsabs=1e-12, points=[1, 5, 10])
    square, _ = integrate.quad(lambda x: x * x * chi.pdf(x), 0, 40, epsabs=1e-12, points=[1, 5, 10])
    assert c4(n) == pytest.approx(mean / math.sqrt(n - 1), rel=1e-9)
    assert c5(n) == pytest.approx(math.sqrt((square - mean * mean) / (n - 1)), rel=1e-8)


@pytest.mark.parametrize("n", range(2, 26))
def test_range_by_independent_integration(n: int) -> None:
    """The mean as the definition has it; the second moment from the joint density of the extremes,
    E R² = 2∬[1 − Φ(y)ⁿ − (1 − Φ(x))ⁿ + (Φ(y) − Φ(x))ⁿ] over x < y."""
    cdf = special.ndtr

    def mean(x: float) -> float:
        return 1 - cdf(x) ** n - cdf(-x) ** n

    def square(y: float, x: float) -> float:
        return 1 - cdf(y) ** n - cdf(-x) ** n + (cdf(y) - cdf(x)) ** n

    first, _ = integrate.quad(mean, -9, 9, epsabs=1e-12)
    second, _ = integrate.dblquad(square, -9, 9, lambda x: x, lambda x: 9, epsabs=1e-9, epsrel=1e-9)
    assert d2(n) == pytest.approx(first, abs=1e-10)
    assert d3(n) == pytest.approx(math.sqrt(2 * second - first * first), abs=1e-7)
