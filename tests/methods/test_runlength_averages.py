"""The EWMA as a Markov chain: its moves, against expectations by scipy, and how limits settle."""

import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from monitor.methods.runlength.averages import Average, ClippedAverage


def mean_of(f, shift: float, clip: float, kinks: list[float]) -> float:  # type: ignore[no-untyped-def]
    """E f(X) of a normal X about ``shift`` limited to ± ``clip``."""
    inside = [-clip, *sorted(x for x in kinks if abs(x) < clip), clip]
    pieces = (
        quad(lambda x: f(x) * norm.pdf(x - shift), low, high, epsabs=1e-13)[0]
        for low, high in itertools.pairwise(inside)
    )
    return f(-clip) * norm.cdf(-clip - shift) + f(clip) * norm.sf(clip - shift) + sum(pieces)


@pytest.mark.parametrize(
    ("shift", "direction", "clip"),
    [
        (0.0, "both", 2.0),
        (0.7, "both", 2.5),  # a node lies at the clip
        (3.0, "both", 2.0),
        (1.0, "up", 1.0),
        (-1.5, "up", 1.0),
    ],
)
def test_a_clipped_value_moves_the_average_as_its_expectation_says(
    shift: float, direction: str, clip: float
) -> None:
    average = ClippedAverage.limited(0.3, 2.5, shift, direction, clip, 2)  # type: ignore[arg-type]
    nodes, low, high = average.nodes, average.low, average.high
    step = nodes[1] - nodes[0]
    for y, keep, add in ((0.0, 0.0, 1.0), (0.4, 0.7, 0.7), (-2.2, 0.7, 0.7)):
        moves = average.moves(np.array([y]), keep, add)[0]
        for j in (0, 1, nodes.size // 3, nodes.size // 2, nodes.size - 2, nodes.size - 1):
            kinks = [(node - keep * y) / add for node in nodes[max(j - 1, 0) : j + 2]]

            def share(x: float, y: float = y, keep: float = keep, add: float = add, j: int = j):  # type: ignore[no-untyped-def]
                to = keep * y + add * x
                if average.walled and to < low:
                    to = low
                if not low <= to <= high:
                    return 0.0
                return max(0.0, 1 - abs(to - nodes[j]) / step)

            assert moves[j] == pytest.approx(mean_of(share, shift, clip, kinks), abs=1e-9)


@settings(max_examples=60)
@given(
    st.sampled_from([0.05, 0.1, 0.3, 0.8, 1.0]),
    st.sampled_from([2.0, 2.5, 3.0]),
    st.sampled_from([-2.0, -0.5, 0.0, 1.0, 2.0, 2.5, 3.0]),
    st.sampled_from(["both", "up"]),
    st.sampled_from([1.0, 2.0, 2.5, 3.0]),
)
def test_every_value_moves_the_average_somewhere_or_signals(
    lam: float, width: float, shift: float, direction: str, clip: float
) -> None:
    """Round numbers put nodes at the clip."""
    average = ClippedAverage.limited(lam, width, shift, direction, clip, 2)  # type: ignore[arg-type]
    for keep, add in ((average.keep, average.add), (0.0, 1.0)):
        moves = average.moves(average.nodes, keep, add)
        signals = average.absorbed(average.nodes, keep, add)
        np.testing.assert_allclose(moves.sum(axis=1) + signals, 1, atol=1e-9)


@pytest.mark.parametrize("lam", [0.03, 0.1, 0.4, 1.0])
@pytest.mark.parametrize("shift", [0.0, 0.1])
@pytest.mark.parametrize("clip", [None, 9.0])
def test_while_limits_settle_mean_and_spread_are_the_averages_own(
    lam: float, shift: float, clip: float | None
) -> None:
    width = 9.0
    average = (
        Average.of(lam, width, shift, "both")
        if clip is None
        else ClippedAverage.limited(lam, width, shift, "both", clip)
    )
    states, steps = np.ones(1), 0
    for moves, times in average.settling(lam):
        for _ in range(times):
            states = states @ moves
        steps += times
    left = (1 - lam) ** steps
    error = math.sqrt(lam / (2 - lam) * (1 - left * left))
    mean = states @ average.nodes
    assert left * left <= 2e-3
    assert states.sum() == pytest.approx(1, abs=1e-6)
    assert mean == pytest.approx(shift * (1 - left) / error, abs=1e-5)
    assert states @ (average.nodes - mean) ** 2 == pytest.approx(
        1, abs=1e-5 if clip is None else 0.05
    )
