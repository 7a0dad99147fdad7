"""The detectors themselves, stepped until they signal: their average run lengths are those of the
tables, which were computed by integral equations, and those of ``monitor.runlengths``.
"""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from monitor.configuration.presets import preset
from monitor.detectors import detector
from monitor.plan import (
    BaselinePlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    RulePlan,
    Scheme,
    ShewhartPlan,
)
from monitor.runlengths import run_length
from monitor.subgroups import Subgroup

BASELINE = BaselinePlan(0.0, 1.0, 0.0, "")
RUNS = 1500
OUTSIDE = (RulePlan("outside", width=3.0),)


def stepped(scheme: Scheme, shift: float, size: int, ratio: float = 1.0) -> tuple[float, float]:
    """Mean run length of 1,500 runs of the real detector, and its standard error."""
    rng = np.random.default_rng(17)
    watched = detector(DetectorPlan("it", "it", scheme, ""), BASELINE)
    scale = math.sqrt(size)
    lengths = []
    for _ in range(RUNS):
        watched.restart()
        for number in itertools.count(1):
            values = tuple((rng.standard_normal(size) * ratio + shift / scale).tolist())
            mean = sum(values) / size
            subgroup = Subgroup(number, values, 0, 0, (None, None, None), False, size, mean)
            if watched.step(subgroup):
                lengths.append(number)
                break
    return float(np.mean(lengths)), float(np.std(lengths) / math.sqrt(RUNS))


@pytest.mark.parametrize(
    ("scheme", "shift", "size", "table"),
    [
        (ShewhartPlan("individual", 3, OUTSIDE), 1, 1, 43.9),
        (ShewhartPlan("mean", 3, OUTSIDE), 2, 5, 6.30),
        (ShewhartPlan("range", 3, OUTSIDE), 0, 5, 217),
        (ShewhartPlan("mean", 3, preset("western-electric-1956", 3)), 0, 2, 91.75),
        (CusumPlan("mean", 0.5, 4), 0.5, 3, 26.6),
        (CusumPlan("mean", 0.5, 5), 1, 1, 10.38),
        (CusumPlan("mean", 0.5, 4), 0, 1, 167.7),
        (EwmaPlan("mean", 0.1, 2.814, asymptotic=True), 0.5, 1, 31.3),
        (EwmaPlan("mean", 0.1, 2.814, asymptotic=True), 1, 4, 10.3),
    ],
)
def test_against_the_tables(scheme: Scheme, shift: float, size: int, table: float) -> None:
    mean, error = stepped(scheme, shift, size)
    assert mean == pytest.approx(table, abs=4 * error)
    assert run_length(scheme, shift, size=size).subgroups == pytest.approx(table, rel=0.004)


@pytest.mark.parametrize(
    ("scheme", "shift"),
    [
        (CusumPlan("individual", 0.5, 5, head_start=0.5, clip=3.0), 1),
        (CusumPlan("individual", 0.25, 6, direction="down"), -0.5),
        (EwmaPlan("individual", 0.2, 2.8), 0.5),
        (EwmaPlan("individual", 0.05, 2.2, direction="up"), 0.3),
        (ShewhartPlan("moving_range", 2, (RulePlan("outside", width=2.0),)), 0),
        (ShewhartPlan("individual", 3, preset("western-electric-1956", 3), "down"), -0.5),
        (ShewhartPlan("individual", 3, preset("nelson-1984", 3)), 0),
        (ShewhartPlan("individual", 3, (RulePlan("trend", length=4),), "up"), 0),
        (ShewhartPlan("individual", 3, (RulePlan("alternation", length=6),)), 0),
    ],
)
def test_against_the_computed_run_length(scheme: Scheme, shift: float) -> None:
    mean, error = stepped(scheme, shift, 1)
    computed = run_length(scheme, shift)
    assert mean == pytest.approx(
        computed.subgroups, abs=4 * math.hypot(error, computed.standard_error)
    )


@pytest.mark.parametrize(
    ("scheme", "size", "ratio"),
    [
        (CusumPlan("variance", 1.46, 5, direction="up", size=5), 5, 1.5),
        (CusumPlan("variance", 1.46, 2, 0.5, direction="up", size=5), 3, 1.0),
        (CusumPlan("variance", 0.65, 2, direction="down", size=5), 5, 0.8),
        (CusumPlan("variance", 1.46, 3, k_lower=0.65, h_lower=1.5, size=5), 5, 1.0),
        (ShewhartPlan("range", 2, (RulePlan("outside", width=2.0),), exact=True), 5, 1.0),
        (ShewhartPlan("sd", 2, (RulePlan("outside", width=2.0),), exact=True), 4, 1.3),
        (ShewhartPlan("variance", 2, (RulePlan("outside", width=2.0),), exact=True), 3, 0.7),
    ],
)
def test_spread_against_the_computed_run_length(scheme: Scheme, size: int, ratio: float) -> None:
    mean, error = stepped(scheme, 0.0, size, ratio)
    assert mean == pytest.approx(
        run_length(scheme, size=size, ratio=ratio).subgroups, abs=4 * error
    )
