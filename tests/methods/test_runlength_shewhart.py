"""Run lengths of charts of location and of spread, by independent distributions and simulation."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.methods.constants import c4, c5, d2, d3, median_se
from monitor.methods.runlength import shewhart, spread
from monitor.plan import Side


def test_the_textbook_row() -> None:
    """Common practice; W. A. Shewhart's three sigma."""
    found = [shewhart.run_length(3, shift) for shift in (0, 0.5, 1, 2)]
    assert found == pytest.approx([370.4, 155.2, 43.9, 6.30], rel=5e-4)


@given(st.floats(1.5, 15), st.floats(-0.5, 0.5), st.sampled_from(["both", "up", "down"]))
def test_the_inverse_gives_back_the_interval(log10: float, ignored: float, sides: str) -> None:
    width = shewhart.width_for(10**log10, ignored, direction=sides)  # type: ignore[arg-type]
    found = shewhart.run_length(width, ignored, direction=sides)  # type: ignore[arg-type]
    assert found == pytest.approx(10**log10, rel=1e-6)


def test_a_signal_beyond_a_float_is_never() -> None:
    assert shewhart.run_length(60) == math.inf


@pytest.mark.parametrize("n", [1, 2])
def test_the_median_of_one_or_two_is_their_mean(n: int) -> None:
    for shift in (0, 1):
        found = shewhart.median_run_length(n, 3, shift)
        assert found == pytest.approx(shewhart.run_length(3, shift), rel=1e-9)


@pytest.mark.parametrize("n", [5, 9])
def test_an_odd_median_is_a_count_of_readings_beyond(n: int) -> None:
    """The median is above x when more than half of the readings are: a binomial tail."""
    limit = (2.5 - 1) * median_se(n)
    above = stats.binom.sf(n // 2, n, stats.norm.sf(limit))
    found = shewhart.median_run_length(n, 2.5, 1, direction="up")
    assert found == pytest.approx(1 / above, rel=1e-9)


def test_an_even_median_against_simulation() -> None:
    rng = np.random.default_rng(5)
    medians = np.median(rng.standard_normal((400_000, 4)), axis=1)
    signals = np.count_nonzero(np.abs(medians / np.std(medians)) > 1.5)
    assert shewhart.median_run_length(4, 1.5) == pytest.approx(400_000 / signals, rel=0.02)


def test_three_sigma_limits_of_spread() -> None:
    """Subgroups of five, by numerical integration elsewhere: range 217, standard deviation 256."""
    assert spread.run_length("range", 5, 3) == pytest.approx(217, abs=0.5)
    assert spread.run_length("sd", 5, 3) == pytest.approx(256, abs=0.5)


@pytest.mark.parametrize("n", [2, 5, 12])
@pytest.mark.parametrize("ratio", [0.7, 1.0, 1.5])
@pytest.mark.parametrize("sides", ["both", "up", "down"])
def test_spread_by_independent_distributions(n: int, ratio: float, sides: str) -> None:
    chi2, ranges = stats.chi2(n - 1), stats.studentized_range(n, np.inf)
    sd_limits = [(c4(n) + w * c5(n)) / ratio for w in (-2.0, 2.0)]
    range_limits = [(d2(n) + w * d3(n)) / ratio for w in (-2.0, 2.0)]

    def expected(below: float, above: float) -> float:
        chance = {"both": below + above, "up": above, "down": below}[sides]
        return 1 / chance if chance else math.inf

    for statistic, (low, high), scale in (
        ("sd", [max(x, 0) ** 2 * (n - 1) for x in sd_limits], chi2),
        ("range", [max(x, 0) for x in range_limits], ranges),
    ):
        found = spread.run_length(statistic, n, 2, ratio, direction=sides)  # type: ignore[arg-type]
        assert found == pytest.approx(expected(scale.cdf(low), scale.sf(high)), rel=1e-5)


@pytest.mark.parametrize("n", [2, 5, 12])
@pytest.mark.parametrize("ratio", [0.7, 1.0, 1.5])
@pytest.mark.parametrize("sides", ["both", "up", "down"])
def test_exact_spread_by_independent_distributions(n: int, ratio: float, sides: str) -> None:
    tail = stats.norm.sf(2.0)
    for statistic, reference, power, scale in (
        ("sd", stats.chi2(n - 1), 2, ratio),
        ("variance", stats.chi2(n - 1), 1, ratio**2),
        ("range", stats.studentized_range(n, np.inf), 1, ratio),
    ):
        low, high = (x ** (1 / power) / scale for x in (reference.ppf(tail), reference.isf(tail)))
        below, above = reference.cdf(low**power), reference.sf(high**power)
        chance = {"both": below + above, "up": above, "down": below}[sides]
        found = spread.run_length(statistic, n, 2, ratio, direction=sides, exact=True)  # type: ignore[arg-type]
        assert found == pytest.approx(1 / chance, rel=1e-5)


@pytest.mark.parametrize("statistic", ["range", "sd", "variance"])
@pytest.mark.parametrize("n", [2, 5, 25])
@pytest.mark.parametrize("wanted", [100, 1e6, 1e15])
@pytest.mark.parametrize("sides", ["both", "up", "down"])
def test_exact_limits_hold_an_interval(
    statistic: spread.Statistic, n: int, wanted: float, sides: Side
) -> None:
    width = spread.exact_width_for(wanted, direction=sides)
    found = spread.run_length(statistic, n, width, direction=sides, exact=True)
    assert found == pytest.approx(wanted, rel=1e-6)


@pytest.mark.parametrize("wanted", [0.9, 1e25])
def test_no_width_for_an_absurd_interval(wanted: float) -> None:
    with pytest.raises(ValueError, match="no setting"):
        spread.exact_width_for(wanted)


def test_a_lower_limit_at_zero_never_signals() -> None:
    assert spread.run_length("range", 5, 3, direction="down") == math.inf
    assert spread.moving_range_run_length(3, direction="down") == math.inf


@pytest.mark.parametrize(
    ("width", "ratio", "exact", "sides"),
    [
        (3, 1.5, False, "both"),
        (2, 1.0, False, "both"),
        (2.5, 1.0, False, "up"),
        (2, 1.0, True, "both"),
        (2, 1.4, True, "up"),
        (1.5, 0.6, True, "down"),
    ],
)
def test_moving_ranges_against_simulation(
    width: float, ratio: float, exact: bool, sides: Side
) -> None:
    """Each signal starts a fresh series, whose first reading has no moving range."""
    rng = np.random.default_rng(3)
    readings = ratio * rng.standard_normal(3_000_000)
    lower, upper = -math.inf, d2(2) + width * d3(2)
    if exact:
        lower, upper = stats.halfnorm(scale=math.sqrt(2)).ppf(stats.norm.cdf([-width, width]))
    moves = np.abs(np.diff(readings))
    out = ((moves > upper) & (sides != "down")) | ((moves < lower) & (sides != "up"))
    beyond = np.flatnonzero(out) + 1
    lengths, start = [], 0
    while (at := int(np.searchsorted(beyond, start + 1))) < beyond.size:
        lengths.append(int(beyond[at]) - start + 1)
        start = int(beyond[at]) + 1
    error = np.std(lengths) / math.sqrt(len(lengths))
    found = spread.moving_range_run_length(width, ratio, direction=sides, exact=exact)
    assert found == pytest.approx(np.mean(lengths), abs=4 * error)
