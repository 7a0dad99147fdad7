"""Array detectors signal at the subgroups, and on the sides, that the engine's detectors do."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import fresh, shewhart

from monitor.detectors import Detector
from monitor.plan import BaselinePlan, ByCount, CusumPlan, EwmaPlan, Scheme, Side
from monitor.subgroups import Subgroup, gatherer
from replay.readings import StreamReadings
from replay.tuning.array_cusum import CusumPath
from replay.tuning.array_ewma import EwmaPath, recurrence
from replay.tuning.array_shewhart import ShewhartPath
from replay.tuning.grouped import GroupedStream, group
from replay.tuning.paths import Path, Signals
from replay.tuning.stepping import Columns, bank, first_signals, warm

BASELINE = BaselinePlan(341.2, 1.9, 0.4, "")
EVER = 2**62
Seen = list[tuple[int, bool]]


def stream(values: np.ndarray, size: int, breaks: tuple[int, ...] = ()) -> GroupedStream:
    readings = StreamReadings(
        (), np.arange(len(values)) * 1_000_000, values, np.array(breaks, np.int64)
    )
    found = group(
        ByCount(size), readings, fit_to=EVER, prove_from=EVER, left_out=(), baseline=BASELINE
    )
    assert found is not None
    return found


def path(scheme: Scheme, held: GroupedStream) -> tuple[Path, float]:
    match scheme:
        case CusumPlan():
            return CusumPath(scheme, held), scheme.h
        case EwmaPlan():
            return EwmaPath(scheme, held), scheme.width
        case _:
            return ShewhartPath(scheme, held), scheme.width


def as_pairs(signals: Signals) -> Seen:
    return list(zip(signals.at.tolist(), signals.up.tolist(), strict=True))


def by_engine(scheme: Scheme, values: np.ndarray, size: int, breaks: tuple[int, ...]) -> Seen:
    judge: Detector = fresh(scheme, BASELINE.mean, BASELINE.sigma, BASELINE.sigma_between)
    gathered = gatherer(ByCount(size), lambda: None)
    seen: Seen = []
    number = 0
    for index, value in enumerate(values.tolist()):
        if index in breaks:
            gathered.abandon()
            judge.restart()
        subgroup: Subgroup | None = gathered.add(value, index, (index, None, None, None))
        if subgroup is not None:
            seen += [(number, s.rule.endswith("-upper")) for s in judge.step(subgroup)]
            number += 1
    return seen


sides = st.sampled_from(["both", "up", "down"])
clips = st.sampled_from([None, 3.0])
booleans = st.booleans()


@st.composite
def schemes(draw: st.DrawFn) -> Scheme:
    direction: Side = draw(sides)
    kind = draw(st.sampled_from(["cusum", "variance", "ewma", "shewhart"]))
    if kind == "variance":
        start = draw(st.sampled_from([0.0, 0.5]))
        size = draw(st.sampled_from([None, 5]))
        return CusumPlan(
            "variance", 1.5, 4.0, start, None, draw(booleans), direction,
            k_lower=0.6, h_lower=2.5, size=size,
        )  # fmt: skip
    if kind == "cusum":
        k = draw(st.sampled_from([0.0, 0.1, 0.5, 1.0]))
        h = draw(st.sampled_from([0.5, 2.0, 4.0, 8.0]))
        start = draw(st.sampled_from([0.0, 0.5]))
        return CusumPlan("mean", k, h, start, draw(clips), draw(booleans), direction)
    if kind == "ewma":
        lam = draw(st.sampled_from([0.01, 0.2, 1.0]))
        width = draw(st.sampled_from([1.0, 2.0, 2.9]))
        return EwmaPlan("mean", lam, width, draw(booleans), draw(clips), draw(booleans), direction)
    return shewhart(chart="mean", width=draw(st.sampled_from([1.0, 2.5])), direction=direction)


@settings(max_examples=120, deadline=None)
@given(
    scheme=schemes(),
    seed=st.integers(0, 2**32),
    shift=st.sampled_from([0.0, 0.0, 0.3, -2.0]),
    step=st.sampled_from([0.0, 0.1, 2.0]),
    size=st.sampled_from([1, 3]),
    breaks=st.sets(st.integers(1, 599), max_size=3),
)
def test_the_same_signals_on_the_same_subgroups(
    scheme: Scheme, seed: int, shift: float, step: float, size: int, breaks: set[int]
) -> None:
    values = np.random.default_rng(seed).normal(BASELINE.mean + shift, BASELINE.sigma, 600)
    if step:
        values = np.round(values / step) * step
    places = tuple(sorted(breaks))
    found, limit = path(scheme, stream(values, size, places))
    assert as_pairs(found.signals(limit)) == by_engine(scheme, values, size, places)


@pytest.mark.parametrize(
    "scheme",
    [
        CusumPlan("mean", 0.5, 4.0),
        CusumPlan("mean", 0.25, 8.0, 0.5, 3.0),
        EwmaPlan("mean", 0.05, 2.5),
        shewhart(chart="mean", width=3.0),
    ],
    ids=["cusum", "head start", "ewma", "shewhart"],
)
def test_a_long_stream(scheme: Scheme) -> None:
    values = np.random.default_rng(5).normal(BASELINE.mean, BASELINE.sigma, 60_000).round(1)
    found, limit = path(scheme, stream(values, 1))
    expected = by_engine(scheme, values, 1, ())
    assert len(expected) > 20
    assert as_pairs(found.signals(limit)) == expected


def test_a_limit_touched_is_not_passed() -> None:
    """Sums of halves are exact: where they come to h itself the engine stays quiet."""
    exact = BaselinePlan(0.0, 1.0, 0.0, "")
    readings = StreamReadings(
        (), np.arange(9), np.array([2.5, 2.5, -9, 3, 1.5, 1, 9, 0, 9.0]), np.array([], np.int64)
    )
    held = group(ByCount(1), readings, fit_to=EVER, prove_from=EVER, left_out=(), baseline=exact)
    assert held is not None
    assert as_pairs(CusumPath(CusumPlan("mean", 0.5, 4.0), held).signals(4.0)) == [
        (2, False),
        (6, True),
        (8, True),
    ]


@settings(max_examples=20, deadline=None)
@given(schemes=st.lists(schemes(), min_size=1, max_size=6), seed=st.integers(0, 2**32))
def test_a_bank_of_settings_signals_as_the_engine_does(schemes: list[Scheme], seed: int) -> None:
    """All settings side by side, each over two streams, warmed by a hundred subgroups: what they
    signal there restarts them, and only what comes after counts."""
    rng = np.random.default_rng(seed)
    values = rng.normal(BASELINE.mean, BASELINE.sigma, (2, 900))
    held = [stream(each, 3) for each in values]
    steps = len(held[0])
    away, error, ratio = (
        np.column_stack([get(each) for each in held])
        for get in (
            lambda s: s.mean - s.centre,
            lambda s: s.error,
            lambda s: (s.sd / s.sigma) ** 2,
        )
    )

    def columns(part: slice) -> Columns:
        shape = away[part].shape
        freedom, there = np.full(shape, 2.0), np.ones(shape, np.bool_)
        return Columns(away[part], error[part], ratio[part], freedom, there)

    assert steps == 300
    kinds: dict[object, list[Scheme]] = {}
    for scheme in schemes:
        kinds.setdefault((type(scheme), scheme.chart == "variance"), []).append(scheme)
    for plans in kinds.values():
        for side in (1, -1, 0):
            sides = np.full(2, side, np.int8)
            detectors = bank(plans, 2)
            warm(detectors, columns(slice(100)))
            first = first_signals(detectors, columns(slice(100, None)), sides, len(plans))
            for row, scheme in enumerate(plans):
                for drift in range(2):
                    seen = by_engine(scheme, values[drift], 3, ())
                    expected = [
                        at - 100 for at, up in seen if at >= 100 and side in (0, 1 if up else -1)
                    ]
                    assert first[row, drift] == (expected[0] if expected else -1)


def test_the_recurrence_in_blocks() -> None:
    inputs = np.random.default_rng(1).normal(size=1_237)
    level, expected = 0.0, []
    for each in inputs:
        level = 0.97 * level + each
        expected.append(level)
    assert recurrence(0.97, inputs) == pytest.approx(expected, abs=1e-12)
    assert list(recurrence(0.5, inputs[:0])) == []


def test_peaks_tell_every_limit(  # a limit just below a peak signals in that cycle, just above not
) -> None:
    values = np.random.default_rng(3).normal(BASELINE.mean, BASELINE.sigma, 2_000)
    held = stream(values, 1)
    for scheme in (
        CusumPlan("mean", 0.5, 1.0),
        EwmaPlan("mean", 0.1, 1.0),
        shewhart(chart="mean"),
    ):
        found, _ = path(scheme, held)
        peaks = found.peaks()
        highest = int(np.argmax(peaks.level))
        top = float(peaks.level[highest])
        assert len(found.signals(top * (1 + 1e-7)).at) == 0
        (only,) = found.signals(top * (1 - 1e-7)).at
        assert peaks.begin[highest] <= only < peaks.end[highest]


def test_single_readings_are_spread_over_the_gauges_step() -> None:
    """Rounding to a fifth of sigma leaves a dozen levels in the tail; peaks have as many as there
    are readings, each within half a step of its own."""
    values = np.random.default_rng(3).normal(BASELINE.mean, BASELINE.sigma, 5_000)
    held = stream(np.round(values / 0.5) * 0.5, 1)
    peaks = ShewhartPath(shewhart(chart="mean"), held).peaks()
    assert len(np.unique(peaks.level)) == len(peaks.level)
    exact = np.abs(held.mean[peaks.begin] - held.centre) / held.error[peaks.begin]
    assert np.abs(peaks.level - exact).max() <= 0.25 / held.error[0]
    means = stream(np.round(values / 0.5) * 0.5, 5)
    exactly = np.abs(means.mean - means.centre) / means.error
    assert np.array_equal(
        ShewhartPath(shewhart(chart="mean"), means).peaks().level, exactly[exactly > 0]
    )
