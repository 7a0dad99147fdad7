"""Run lengths of the EWMA: against simulation, against the Shewhart chart it becomes, far out."""

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from monitor.methods.runlength import shewhart
from monitor.methods.runlength.cusum import decision_interval
from monitor.methods.runlength.cusum import run_length as cusum_run_length
from monitor.methods.runlength.ewma import best_weight, run_length, width_for

SERIES = 20_000


def simulated(
    lam: float,
    width: float,
    shift: float,
    asymptotic: bool,
    sides: str,
    clip: float = math.inf,
) -> tuple[float, float]:
    """Mean run length of 20,000 series, and its standard error."""
    rng = np.random.default_rng(11)
    average = np.zeros(SERIES)
    variance = 0.0
    lengths: list[np.ndarray] = []
    step = 0
    while average.size:
        step += 1
        value = np.clip(rng.standard_normal(average.size) + shift, -clip, clip)
        average = lam * value + (1 - lam) * average
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
    ("lam", "width", "shift", "asymptotic", "sides", "clip"),
    [
        (0.1, 2.6, 0, True, "both", 2.0),
        (0.1, 2.6, 1, False, "both", 1.5),
        (0.2, 2.7, 0, True, "up", 3.0),
        (0.5, 2.3, 0, False, "both", 2.5),
        (0.02, 2.2, 0, False, "both", 2.0),
        (0.02, 2.0, 1, False, "both", 2.0),
        (0.8, 2.2, 0, True, "both", 2.0),
        (0.005, 2.5, 3, False, "up", 3.0),  # signalled long before the limits settle
        (0.02, 2.5, 2, False, "both", 2.0),
        (0.2, 2.5, -2, False, "down", 2.0),
        (0.4, 2.5, 1, False, "both", 2.5),
    ],
)
def test_clipped_values_against_simulation(
    lam: float, width: float, shift: float, asymptotic: bool, sides: str, clip: float
) -> None:
    mean, error = simulated(lam, width, shift, asymptotic, sides, clip)
    computed = run_length(
        lam,
        width,
        shift,
        direction=sides,  # type: ignore[arg-type]
        asymptotic=asymptotic,
        clip=clip,
    )
    assert computed == pytest.approx(mean, abs=3 * error + 0.03 * mean)


@settings(max_examples=20, deadline=None)
@given(
    st.floats(0.01, 1),
    st.floats(2, 7),
    st.floats(2, 4),
    st.sampled_from(["both", "up"]),
    st.booleans(),
    st.floats(0, 0.2),
)
def test_the_inverse_gives_back_the_interval_of_clipped_values(
    lam: float, log10: float, clip: float, direction: str, asymptotic: bool, ignored: float
) -> None:
    """Or, where the run length jumps past it, the width from which on it is longer."""
    wanted = 10**log10
    options = {"direction": direction, "asymptotic": asymptotic, "clip": clip}
    try:
        width = width_for(lam, wanted, ignored, **options)  # type: ignore[arg-type]
    except ValueError:
        assume(False)
    length = run_length(lam, width, ignored, **options)  # type: ignore[arg-type]
    before = run_length(lam, width * (1 - 1e-5), ignored, **options)  # type: ignore[arg-type]
    assert length > 0.998 * wanted
    assert length < 1.002 * wanted or before < wanted


def test_a_wide_clip_changes_nothing() -> None:
    free = run_length(0.1, 2.814, 0.3, asymptotic=True)
    assert run_length(0.1, 2.814, 0.3, asymptotic=True, clip=7.0) == pytest.approx(free, rel=2e-3)


def test_the_width_allows_for_the_clip() -> None:
    width = width_for(0.2, 1e5, clip=2.0)
    assert width < width_for(0.2, 1e5)
    # Where the limit is a sum of values at the clip, the run length jumps past what is wanted.
    assert 0.999e5 < run_length(0.2, width, clip=2.0) < 1.02e5


def test_a_clip_that_no_average_gets_past() -> None:
    """λ 0.2 for a run length of 10⁵ at values of 0.2 at most: even at 0.2 for ever it is short."""
    assert run_length(0.2, 3.0, clip=0.9) == math.inf
    with pytest.raises(ValueError, match="no setting"):
        width_for(0.9, 1e5, clip=0.05)


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


@pytest.mark.parametrize("lam", [0.003, 0.01, 0.05, 0.2, 0.6])
def test_far_out_exact_and_asymptotic_limits_agree(lam: float) -> None:
    width = width_for(lam, 1e15, asymptotic=True)
    assert run_length(lam, width) == pytest.approx(1e15, rel=1e-4)


@settings(max_examples=30)
@given(
    st.floats(0.03, 1),
    st.floats(2.5, 12),  # shorter: none where the mean is off the other way
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


@settings(max_examples=15)
@given(
    st.floats(0.004, 0.03),
    st.floats(2, 12),
    st.sampled_from(["both", "up"]),
    st.booleans(),
    st.floats(0, 0.2),
)
def test_the_inverse_gives_back_the_interval_at_small_weights(
    lam: float, log10: float, direction: str, asymptotic: bool, ignored: float
) -> None:
    options = {"direction": direction, "asymptotic": asymptotic}
    width = width_for(lam, 10**log10, ignored, **options)  # type: ignore[arg-type]
    assert run_length(lam, width, ignored, **options) == pytest.approx(10**log10, rel=2e-5)  # type: ignore[arg-type]


@pytest.mark.parametrize("shift", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("wanted", [500, 1e6])
def test_no_other_weight_is_faster(shift: float, wanted: float) -> None:
    def delay(lam: float) -> float:
        width = width_for(lam, wanted, asymptotic=True)
        return run_length(lam, width, shift, asymptotic=True)

    best = best_weight(shift, wanted)
    assert delay(best) <= 1.002 * min(delay(best * f) for f in (0.5, 0.7, 0.85, 1.2, 1.5))


@pytest.mark.parametrize(("shift", "wanted"), [(0.2, 1000.0), (0.5, 200.0), (1.0, 50.0)])
def test_one_side_begins_clear_of_its_limit(shift: float, wanted: float) -> None:
    """No detector that rings at its start, as the tiniest weight would: of a simulation, as many of
    the first tenth of ``wanted`` points as chance has it, or fewer."""
    lam = best_weight(shift, wanted, direction="up")
    width = width_for(lam, wanted, direction="up")
    rng = np.random.default_rng(1)
    average, variance, rung = np.zeros(20_000), 0.0, np.zeros(20_000, np.bool_)
    for _ in range(round(wanted / 10)):
        average = lam * rng.standard_normal(average.size) + (1 - lam) * average
        variance = lam**2 + (1 - lam) ** 2 * variance
        rung |= average > width * math.sqrt(variance)
    assert rung.mean() < 0.25
    # Two sides that ring as often each have the same weight.
    assert lam == best_weight(shift, 2 * wanted)


def test_the_best_weight_falls_with_the_interval() -> None:
    """About 0.045·d² at long intervals, not the textbook's 0.2; and close to the CUSUM's delay."""
    lam = best_weight(1.0, 1e6)
    assert lam == pytest.approx(0.045, rel=0.15)
    delay = run_length(lam, width_for(lam, 1e6, asymptotic=True), 1.0, asymptotic=True)
    floor = cusum_run_length(0.5, decision_interval(0.5, 1e6), 1.0)
    assert floor < delay < 1.1 * floor


@pytest.mark.parametrize(("shift", "wanted"), [(20, 1e6), (10, 5), (15, 1e6)])
def test_shifts_that_any_single_point_shows_take_all_weight(shift: float, wanted: float) -> None:
    """Where every weight signals at once, there is no best one to be found between them."""
    lam = best_weight(shift, wanted)
    width = width_for(lam, wanted)
    assert run_length(lam, width) == pytest.approx(wanted, rel=2e-5)
    assert run_length(lam, width, shift) == pytest.approx(1, abs=1e-3)


@pytest.mark.parametrize(("shift", "ignored"), [(20, 19.9), (9, 8.9), (2, 1.9), (1, 0.9)])
def test_what_is_to_be_ignored_may_lie_close_to_what_is_to_be_caught(
    shift: float, ignored: float
) -> None:
    lam = best_weight(shift, 1e9, ignored)
    width = width_for(lam, 1e9, ignored)
    assert run_length(lam, width, ignored) == pytest.approx(1e9, rel=2e-5)
    assert run_length(lam, width, shift) < 1e9


@pytest.mark.parametrize(("shift", "wanted"), [(4, 5), (4, 12), (2, 15), (1, 20)])
def test_short_intervals_on_one_side_are_had_with_large_weights(
    shift: float, wanted: float
) -> None:
    lam = best_weight(shift, wanted, direction="up")
    width = width_for(lam, wanted, direction="up")
    assert run_length(lam, width, direction="up") == pytest.approx(wanted, rel=2e-5)


def test_a_mean_far_off_to_one_side_never_meets_the_other_limit() -> None:
    both = run_length(0.1, 14.0, 3.0, asymptotic=True)
    assert both == pytest.approx(run_length(0.1, 14.0, 3.0, direction="up", asymptotic=True))
    assert both == pytest.approx(run_length(0.1, 14.0, -3.0, asymptotic=True), rel=1e-12)
