"""Run lengths of Shewhart rules: closed forms, chain against simulation, each rule on its own."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.methods.normal import sf
from monitor.methods.runlength import rules, shewhart, simulation
from monitor.plan import RulePlan

OUTSIDE = RulePlan("outside", width=3)
TWO_OF_THREE = RulePlan("zone", width=2, count=2, of=3)
FOUR_OF_FIVE = RulePlan("zone", width=1, count=4, of=5)
RUN = RulePlan("run", length=8)
STRATIFICATION = RulePlan("stratification", width=1, length=9)
MIXTURE = RulePlan("mixture", width=1, length=4)
TREND = RulePlan("trend", length=4)
ALTERNATION = RulePlan("alternation", length=6)


def in_a_row(chance: float, length: int) -> float:
    """Mean wait for ``length`` successes in a row (W. Feller, An Introduction to Probability
    Theory and Its Applications I, chapter XIII)."""
    return (1 - chance**length) / ((1 - chance) * chance**length)


def test_rules_with_closed_forms() -> None:
    inside = 1 - 2 * sf(1)
    assert rules.run_length([OUTSIDE], 0.7) == pytest.approx(shewhart.run_length(3, 0.7), rel=1e-9)
    assert rules.run_length([RUN], direction="up") == pytest.approx(in_a_row(0.5, 8), rel=1e-9)
    assert rules.run_length([RUN]) == pytest.approx(2**8 - 1, rel=1e-9)  # like runs of a fair coin
    assert rules.run_length([STRATIFICATION]) == pytest.approx(in_a_row(inside, 9), rel=1e-9)
    assert rules.run_length([MIXTURE]) == pytest.approx(in_a_row(1 - inside, 4), rel=1e-9)


def test_patterns_without_a_chain_have_closed_forms_too() -> None:
    """Any order of n values is as likely: n! / (orders without the pattern) by hand for three."""
    alternating = simulation.run_length([RulePlan("alternation", length=3)])
    # No turn in n values: they rise or fall throughout, 2/n!; the sum over n is 2e − 2.
    assert alternating.run_length == pytest.approx(
        2 * math.e - 2, abs=4 * alternating.standard_error
    )
    rising = simulation.run_length([RulePlan("trend", length=2)], direction="up")
    # No rise in n values: they fall throughout, 1/n!; the sum over n is e.
    assert rising.run_length == pytest.approx(math.e, abs=4 * rising.standard_error)


@pytest.mark.parametrize(("shift", "direction"), [(0.0, "both"), (0.8, "up"), (-1.0, "down")])
@pytest.mark.parametrize(
    "chosen",
    [
        [TWO_OF_THREE],
        [OUTSIDE, FOUR_OF_FIVE],
        [OUTSIDE, TWO_OF_THREE, FOUR_OF_FIVE, RUN],
        [STRATIFICATION, RUN],
        [MIXTURE, OUTSIDE],
    ],
)
def test_chain_against_simulation(
    chosen: list[RulePlan], shift: float, direction: rules.Side
) -> None:
    exact = rules.run_length(chosen, shift, direction=direction)
    simulated = simulation.run_length(chosen, shift, direction=direction, seed=3)
    assert simulated.run_length == pytest.approx(exact, abs=4 * simulated.standard_error)


def test_a_simulation_cut_off_still_states_its_error() -> None:
    long = [RulePlan("mixture", width=1, length=8)]
    simulated = simulation.run_length(long)
    assert 0.02 < simulated.standard_error / simulated.run_length < 0.05
    exact = rules.run_length(long)
    assert simulated.run_length == pytest.approx(exact, abs=4 * simulated.standard_error)


def test_what_never_signals() -> None:
    assert rules.run_length([RulePlan("outside", width=60)]) == math.inf
    never = simulation.run_length([RulePlan("outside", width=60)])
    assert (never.run_length, never.standard_error) == (math.inf, math.inf)


@pytest.mark.parametrize("width", [5.0, 8.0])
def test_a_rare_rule_keeps_its_digits(width: float) -> None:
    found = rules.run_length([RulePlan("outside", width=width)])
    assert found == pytest.approx(shewhart.run_length(width), rel=1e-9)


def test_which_rules_the_chain_takes() -> None:
    assert rules.exact([OUTSIDE, TWO_OF_THREE, FOUR_OF_FIVE, RUN, STRATIFICATION, MIXTURE])
    assert not rules.exact([OUTSIDE, TREND])
    assert not rules.exact([ALTERNATION])
    assert not rules.exact([RulePlan("zone", width=1, count=10, of=12)])


@settings(max_examples=25)
@given(st.floats(0, 3), st.sampled_from(["both", "up", "down"]))
def test_another_rule_never_lengthens_the_wait(shift: float, direction: rules.Side) -> None:
    one = rules.run_length([OUTSIDE], shift, direction=direction)
    two = rules.run_length([OUTSIDE, TWO_OF_THREE], shift, direction=direction)
    four = rules.run_length([OUTSIDE, TWO_OF_THREE, FOUR_OF_FIVE, RUN], shift, direction=direction)
    assert 1 <= four <= two * (1 + 1e-9) <= one * (1 + 2e-9)


@given(st.floats(-3, 3))
def test_a_rise_is_to_the_upper_side_what_a_fall_is_to_the_lower(shift: float) -> None:
    chosen = [OUTSIDE, TWO_OF_THREE, FOUR_OF_FIVE, RUN]
    up = rules.run_length(chosen, shift, direction="up")
    down = rules.run_length(chosen, -shift, direction="down")
    assert up == pytest.approx(down, rel=1e-9)


def test_first_signals_of_given_series_are_where_the_rule_is_met_first() -> None:
    """Worked by hand: eight on one side, two of three beyond 2; the last column signals nowhere."""
    series = np.zeros((10, 4))
    series[:, 0] = 1
    series[[3, 5, 6], 1] = 2.5
    series[[0, 9], 2] = 2.5, -3.5
    found = simulation.first_signals([OUTSIDE, TWO_OF_THREE, RUN], series)

    assert found.tolist() == [8, 6, 10, 11]
