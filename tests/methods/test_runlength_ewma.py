"""Run lengths of the EWMA: against simulation, against the Shewhart chart it becomes, far out."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.methods.runlength import shewhart
from monitor.methods.runlength.cusum import decision_interval
from monitor.methods.runlength.cusum import run_length as cusum_run_length
from monitor.methods.runlength.ewma import best_weight, run_length, width_for

SERIES = 20_000


def simulated(
    lam: float, width: float, shift: float, asymptotic: bool, sides: str
) -> tuple[float, float]:
    """Mean run length of 20,000 series, and its standard error."""
    rng = np.random.default_rng(11)
    average = np.zeros(SERIES)
    variance = 0.0
    lengths: list[np.ndarray] = []
    step = 0
    while average.size:
        step += 1
        average = lam * (rng.standard_normal(average.size) + shift) + (1 - lam) * average
        variance = lam**2 + (1 - lam) ** 2 * variance
        reach = width * math.sqrt(lam / (2 - lam) if asymptotic else variance)
        over = np.zeros(average.size, bool)
        if sides != "down":
            over |= average > reach
        if sides != "up":
            over |= average < -reach
        lengths.append(np.full(int(over.sum()), step))
        average = average[~over]
    found = np.concatenate(lengths)
    return float(found.mean()), float(found.std() / math.sqrt(SERIES))


@pytest.mark.parametrize(
    ("lam", "width", "shift", "asymptotic", "sides"),
    [
        (0.2, 2.6, 0, True, "both"),
        (0.2, 2.6, 0, False, "both"),
        (0.05, 2.2, 0, False, "both"),
        (0.05, 2.6, 0.5, False, "both"),
        (0.02, 2.0, 0, False, "up"),
        (0.1, 2.5, 0, True, "up"),
        (0.1, 2.5, -0.2, False, "down"),
        (0.5, 3.0, 1, False, "both"),
    ],
)
def test_against_simulation(
    lam: float, width: float, shift: float, asymptotic: bool, sides: str
) -> None:
    mean, error = simulated(lam, width, shift, asymptotic, sides)
    computed = run_length(lam, width, shift, direction=sides, asymptotic=asymptotic)  # type: ignore[arg-type]
    assert computed == pytest.approx(mean, abs=4 * error)


@pytest.mark.parametrize("asymptotic", [True, False])
@pytest.mark.parametrize("sides", ["both", "up", "down"])
def test_with_all_weight_on_the_newest_it_is_a_shewhart_chart(asymptotic: bool, sides: str) -> None:
    for shift in (0, 0.5, 2):
        ewma = run_length(1, 3, shift, direction=sides, asymptotic=asymptotic)  # type: ignore[arg-type]
        chart = shewhart.run_length(3, shift, direction=sides)  # type: ignore[arg-type]
        assert ewma == pytest.approx(chart, rel=1e-6)


@pytest.mark.parametrize("lam", [0.05, 0.2, 0.6])
def test_far_out_exact_and_asymptotic_limits_agree(lam: float) -> None:
    width = width_for(lam, 1e15, asymptotic=True)
    assert run_length(lam, width) == pytest.approx(1e15, rel=1e-4)


@settings(max_examples=30)
@given(
    st.floats(0.03, 1),
    st.floats(1.5, 12),
    st.sampled_from(["both", "up", "down"]),
    st.booleans(),
    st.floats(-0.2, 0.2),
)
def test_the_inverse_gives_back_the_interval(
    lam: float, log10: float, direction: str, asymptotic: bool, ignored: float
) -> None:
    wanted = 10**log10
    options = {"direction": direction, "asymptotic": asymptotic}
    width = width_for(lam, wanted, ignored, **options)  # type: ignore[arg-type]
    assert run_length(lam, width, ignored, **options) == pytest.approx(wanted, rel=2e-5)  # type: ignore[arg-type]


@pytest.mark.parametrize("shift", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("wanted", [500, 1e6])
def test_no_other_weight_is_faster(shift: float, wanted: float) -> None:
    def delay(lam: float) -> float:
        width = width_for(lam, wanted, asymptotic=True)
        return run_length(lam, width, shift, asymptotic=True)

    best = best_weight(shift, wanted)
    assert delay(best) <= 1.002 * min(delay(best * f) for f in (0.5, 0.7, 0.85, 1.2, 1.5))


def test_the_best_weight_falls_with_the_interval() -> None:
    """About 0.045·d² at long intervals, not the textbook's 0.2; and close to the CUSUM's delay."""
    lam = best_weight(1.0, 1e6)
    assert lam == pytest.approx(0.045, rel=0.15)
    delay = run_length(lam, width_for(lam, 1e6, asymptotic=True), 1.0, asymptotic=True)
    floor = cusum_run_length(0.5, decision_interval(0.5, 1e6), 1.0)
    assert floor < delay < 1.1 * floor
