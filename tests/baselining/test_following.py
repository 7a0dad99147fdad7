"""How often detectors ring on means that follow each other, against simulation mean by mean."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np
import pytest
from scipy.signal import lfilter
from streams import CUSUM, SHEWHART

from monitor import runlengths
from monitor.baselining.following import Following, widened
from monitor.plan import CusumPlan, EwmaPlan, RulePlan, Scheme, ShewhartPlan

Processes = dict[str, tuple[np.ndarray, list[float], list[float]]]  # type: ignore[type-arg]

LAGS = np.arange(300)

PROCESSES: Processes = {
    "AR(1), 0.5": (0.5**LAGS, [math.sqrt(0.75)], [1, -0.5]),
    "AR(1), 0.8": (0.8**LAGS, [0.6], [1, -0.8]),
    "means of five that overlap": (np.maximum(1 - LAGS / 5, 0), [0.2**0.5] * 5, [1]),
}
"""Autocorrelations, and the filter that makes such values from independent ones."""


def told(scheme: Scheme, memory: np.ndarray) -> float:  # type: ignore[type-arg]
    means = Following(memory)
    wider = widened(scheme, means.wider(scheme))
    return means.longer(scheme) * runlengths.run_length(wider).subgroups


def values(process: str, chance: np.random.Generator) -> Iterator[float]:
    """From a process that has long been running."""
    _, forward, back = PROCESSES[process]
    yield from lfilter(forward, back, chance.normal(size=20_000))[200:].tolist()


def run_length(scheme: CusumPlan | EwmaPlan, process: str, chance: np.random.Generator) -> int:
    """Points until the detector signals: from its definition."""
    upper = lower = average = 0.0
    clip = scheme.clip or math.inf
    for count, raw in enumerate(values(process, chance), 1):
        value = min(max(raw, -clip), clip)
        if isinstance(scheme, CusumPlan):
            upper = max(0.0, upper + value - scheme.k)
            lower = max(0.0, lower - value - scheme.k)
            rises, falls = upper >= scheme.h, lower >= scheme.h
        else:
            average += scheme.lam * (value - average)
            reach = scheme.width * math.sqrt(scheme.lam / (2 - scheme.lam))
            rises, falls = average >= reach, average <= -reach
        if (rises and scheme.direction != "down") or (falls and scheme.direction != "up"):
            return count
    raise AssertionError("no signal")


@pytest.mark.parametrize("process", PROCESSES)
@pytest.mark.parametrize(
    "scheme",
    [
        CusumPlan("mean", 0.25, 19.09),
        CusumPlan("mean", 0.5, 10.36),
        CusumPlan("mean", 0.5, 10.36, clip=1.5, direction="up"),
        CusumPlan("mean", 1.0, 5.31, direction="down"),
        EwmaPlan("mean", 0.05, 4.23, asymptotic=True),
        EwmaPlan("mean", 0.2, 4.38, asymptotic=True),
    ],
)
def test_where_alarms_are_frequent_it_is_the_simulated_one(
    scheme: CusumPlan | EwmaPlan, process: str
) -> None:
    """Settings for an interval of 1e5: on these processes they ring once in hundreds."""
    chance = np.random.default_rng(1)
    runs = [run_length(scheme, process, chance) for _ in range(120)]
    error = np.std(runs) / np.mean(runs) / math.sqrt(len(runs))

    assert told(scheme, PROCESSES[process][0]) == pytest.approx(
        float(np.mean(runs)), rel=4 * math.hypot(float(error), 0.05)
    )


@pytest.mark.parametrize(
    ("correlation", "expected"), [(0.1, 1.3e5), (0.3, 6.6e3), (0.5, 830), (0.8, 109)]
)
def test_where_they_are_rare_it_is_that_of_the_table(correlation: float, expected: float) -> None:
    """The project's table of methods, "What breaks textbook promises in line": simulated there for
    a CUSUM made for 1e6."""
    assert told(CUSUM, correlation**LAGS) == pytest.approx(expected, rel=0.3)


def test_what_reaches_beyond_the_detectors_memory_costs_it_little() -> None:
    """A twentieth of the variance that takes 200 means to fade: simulated with 1,500 signals from
    the definition, once in 1,410 for the EWMA of a tenth of that memory, 3,443 for the CUSUM. A
    spread as that of a long mean would have them ring once in some 15."""
    memory = 0.05 * 0.995 ** np.arange(1000)
    memory[0] = 1

    assert told(EwmaPlan("mean", 0.05, 4.229, asymptotic=True), memory) == pytest.approx(
        1410, rel=0.3
    )
    assert told(CUSUM, memory) == pytest.approx(3443, rel=0.3)


@pytest.mark.parametrize("scheme", [CUSUM, EwmaPlan("mean", 0.1, 4.0), SHEWHART])
def test_independent_means_change_nothing(scheme: CusumPlan) -> None:
    means = Following(np.ones(1))

    assert (means.wider(scheme), means.longer(scheme)) == (1, 1)


def test_a_shewhart_limit_sees_one_mean_at_a_time() -> None:
    means = Following(0.8**LAGS)

    assert (means.wider(SHEWHART), means.longer(SHEWHART)) == (1, 1)
    hardly_a_sum = CusumPlan("mean", 4.5, 0.4)
    assert 0.3 < told(hardly_a_sum, 0.8**LAGS) / runlengths.run_length(hardly_a_sum).subgroups < 3


def test_a_run_on_one_side_comes_sooner() -> None:
    """From the definition. Of two neighbours, 1/2 + arcsin(φ)/π lie on one side (W. F. Sheppard
    1899): two of three where φ is a half."""
    run_of_eight = ShewhartPlan("mean", 3.0, (RulePlan("run", length=8),))
    chance = np.random.default_rng(2)
    waits = []
    for _ in range(150):
        row, side = 0, False
        for count, value in enumerate(values("AR(1), 0.5", chance), 1):
            row, side = (row + 1 if (value > 0) == side else 1), value > 0
            if row == 8:
                waits.append(count)
                break

    expected = float(np.mean(waits))
    assert told(run_of_eight, 0.5**LAGS) == pytest.approx(expected, rel=0.3)
    assert expected < 0.4 * runlengths.run_length(run_of_eight).subgroups
