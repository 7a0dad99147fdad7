"""How often detectors ring on means that follow each other, though nothing is wrong.

Knows normal series of given autocorrelations. Must not know baselines or promises.

A detector remembers only so far: a CUSUM about h/k means, an EWMA 1/λ. So its run length is that on
independent means as much wider as means look over its own memory, times a factor. The factor comes
from simulation, up to the limits that a simulation reaches; beyond, the widened run length says by
how much alarms become rarer, which is what large deviations are good for.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from monitor import runlengths
from monitor.methods import autocorrelation
from monitor.methods.normal import Array
from monitor.methods.runlength import simulation
from monitor.plan import CusumPlan, EwmaPlan, Scheme, ShewhartPlan

_SEED = 7_870
_SERIES, _LENGTH = 1_024, 2_048
_SIGNALS = 400
"""In the series together: an error of 5 % in what is simulated."""
_FEWEST = 30
"""Signals of rules, below which nothing is told of them."""
_FARTHEST = 8
"""Times h/k, beyond which no path of a CUSUM to its limit is likely."""
_LEAST_K = 1e-3

OVERSHOOT = 1.166
"""By which a normal sum passes its limit on average, twice over (D. Siegmund 1985)."""


class Following:
    """Means with the autocorrelations ``memory``, lags 0 …, and none beyond."""

    def __init__(self, memory: Array) -> None:
        self._memory = memory
        self._series: Array | None = None
        self._factors: dict[Scheme, float] = {}

    def wider(self, scheme: Scheme) -> float:
        """Spread of a mean over the memory of ``scheme``, over that of an independent one."""
        if len(self._memory) == 1 or isinstance(scheme, ShewhartPlan):
            return 1.0
        if isinstance(scheme, EwmaPlan):
            return math.sqrt(autocorrelation.averaged(self._memory, scheme.lam))
        # The likeliest path to h takes m means, with a chance of about exp(−(h + mk)²/2mV(m)): for
        # independent ones m = h/k, and exp(−2kh).
        h, k = scheme.h + OVERSHOOT, max(scheme.k, _LEAST_K)
        longest = math.ceil(_FARTHEST * h / k) + 4 * len(self._memory)
        means = np.arange(1, longest + 1)
        likely = 4 * h * k * means / (h + means * k) ** 2
        variance = autocorrelation.inflations(self._memory, longest) * likely
        return math.sqrt(max(1.0, float(variance.max())))

    def longer(self, scheme: Scheme) -> float:
        """Run length of ``scheme``, over that on independent means :meth:`wider` than they are."""
        if len(self._memory) == 1:
            return 1.0
        if scheme not in self._factors:
            if self._series is None:
                chance = np.random.default_rng(_SEED)
                self._series = autocorrelation.alike(self._memory, _LENGTH, _SERIES, chance)
            self._factors[scheme] = (
                _of_rules(scheme, self._series)
                if isinstance(scheme, ShewhartPlan)
                else self._of_sums(scheme, self._series)
            )
        return self._factors[scheme]

    def _of_sums(self, scheme: CusumPlan | EwmaPlan, series: Array) -> float:
        highest = _highest(scheme, series)
        limit = scheme.h if isinstance(scheme, CusumPlan) else scheme.width
        # No farther out than enough of the series come.
        limit = min(limit, float(np.partition(highest[-1], -_SIGNALS)[-_SIGNALS]))
        if limit <= 0:
            return 1.0  # hardly any single mean is beyond k: a Shewhart limit, in effect
        within = (highest < limit).sum(axis=0)
        points, signals = np.minimum(within + 1, _LENGTH).sum(), (within < _LENGTH).sum()
        nearer = _with_limit(scheme, limit)
        told = runlengths.run_length(widened(nearer, self.wider(nearer))).subgroups
        return float(points / signals) / told


def _of_rules(scheme: ShewhartPlan, series: Array) -> float:
    if all(rule.rule == "outside" for rule in scheme.rules):
        return 1.0  # one mean at a time: close ones only make alarms come in bursts
    on_means = replace(scheme, chart="mean")
    points = simulation.first_signals(scheme.rules, series, direction=scheme.direction)
    signals = int((points <= _LENGTH).sum())
    if signals < _FEWEST:
        return 1.0
    run_length = float(np.minimum(points, _LENGTH).sum()) / signals
    return run_length / runlengths.run_length(on_means).subgroups


def widened(scheme: Scheme, wider: float) -> Scheme:
    """``scheme`` as it is for means ``wider`` times as wide, taken together. One by one they are
    no wider, so a clip stays."""
    match scheme:
        case CusumPlan():
            return replace(scheme, k=scheme.k / wider, h=scheme.h / wider)
        case EwmaPlan():
            return replace(scheme, width=scheme.width / wider)
        case ShewhartPlan():
            return scheme


def _with_limit(scheme: CusumPlan | EwmaPlan, limit: float) -> CusumPlan | EwmaPlan:
    """From a plain start, as series are simulated."""
    if isinstance(scheme, CusumPlan):
        return replace(scheme, h=limit, head_start=0.0)
    return replace(scheme, width=limit, asymptotic=True)


def _highest(scheme: CusumPlan | EwmaPlan, series: Array) -> Array:
    """How far towards its limit the statistic has come so far, for each series in each step."""
    clip = math.inf if scheme.clip is None else scheme.clip
    sides = {"both": (1.0, -1.0), "up": (1.0,), "down": (-1.0,)}[scheme.direction]
    highest = np.empty_like(series)
    so_far = np.zeros_like(series[0])
    states = [np.zeros_like(so_far) for _ in sides]
    for step, raw in enumerate(series):
        values = np.clip(raw, -clip, clip)
        for side, state in zip(sides, states, strict=True):
            if isinstance(scheme, CusumPlan):
                np.maximum(state + (side * values - scheme.k), 0.0, out=state)
                reached = state
            else:
                state += scheme.lam * (side * values - state)
                reached = state * math.sqrt((2 - scheme.lam) / scheme.lam)
            np.maximum(so_far, reached, out=so_far)
        highest[step] = so_far
    return highest
