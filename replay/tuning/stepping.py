"""Many settings over many drifts at once, subgroup by subgroup: when does each first signal?

Knows detectors' steps as arrays (settings × drifts). Must not know where drifts came from.
"""

from __future__ import annotations

import copy
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol, Self

import numpy as np
from numpy.typing import NDArray

from monitor.plan import CusumPlan, EwmaPlan, Scheme, ShewhartPlan
from replay.readings import Places, Values

Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Columns:
    """Subgroups of every drift side by side, all (steps, drifts): ``away`` of the mean from its
    centre and its standard ``error`` in the gauge's unit, ``ratio`` of variance to sigma²,
    ``freedom`` n − 1; ``there`` is false where that drift has no such subgroup."""

    away: Values
    error: Values
    ratio: Values
    freedom: Values
    there: Mask

    def __len__(self) -> int:
        return len(self.away)


class Bank(Protocol):
    """Detectors of one kind, each over every drift."""

    def step(self, columns: Columns, at: int) -> tuple[Mask, Mask]:
        """Take subgroup ``at`` of each drift; who signals upwards, who downwards: (settings,
        drifts)."""

    def keep(self, rows: Places) -> None:
        """Go on with these settings only."""

    def copy(self) -> Self:
        """The same, to go on differently."""


class _Settings:
    """Arrays whose first axis is the setting."""

    _arrays: tuple[str, ...] = ()

    def keep(self, rows: Places) -> None:
        """Go on with these settings only."""
        for name in self._arrays:
            setattr(self, name, getattr(self, name)[rows])

    def copy(self) -> Self:
        """The same, to go on differently."""
        twin = copy.copy(self)
        for name in self._arrays:
            setattr(twin, name, getattr(self, name).copy())
        return twin


class CusumBank(_Settings):
    """Tabular CUSUMs of means."""

    _arrays = ("_k", "_h", "_clip", "_start", "_hold", "_upper", "_lower", "_up", "_down")

    def __init__(self, plans: Sequence[CusumPlan], drifts: int) -> None:
        self._k, self._h = _column(p.k for p in plans), _column(p.h for p in plans)
        self._clip = _column(np.inf if p.clip is None else p.clip for p in plans)
        self._start = _column(p.head_start * p.h for p in plans)
        self._hold = _flags(p.hold for p in plans)
        self._up, self._down = _sides(plans)
        self._upper = np.broadcast_to(self._start, (len(plans), drifts)).copy()
        self._lower = self._upper.copy()

    def step(self, columns: Columns, at: int) -> tuple[Mask, Mask]:
        """C ← max(0, C ± z − k); one that signals goes to its head start."""
        there = columns.there[at]
        z = np.clip(columns.away[at] / columns.error[at], -self._clip, self._clip)
        upper = np.maximum(self._upper + (z - self._k), 0.0)
        lower = np.maximum(self._lower - (z + self._k), 0.0)
        above, below = (upper > self._h) & there & self._up, (lower > self._h) & there & self._down
        self._upper = _go_on(self._upper, upper, above & ~self._hold, self._start, there)
        self._lower = _go_on(self._lower, lower, below & ~self._hold, self._start, there)
        return above, below


class VarianceBank(_Settings):
    """CUSUMs of the variance."""

    _arrays = (
        "_k", "_h", "_k_lower", "_h_lower", "_planned", "_start", "_hold", "_upper", "_lower",
        "_up", "_down",
    )  # fmt: skip

    def __init__(self, plans: Sequence[CusumPlan], drifts: int) -> None:
        self._k, self._h = _column(p.k for p in plans), _column(p.h for p in plans)
        self._k_lower = _column(p.k if p.k_lower is None else p.k_lower for p in plans)
        self._h_lower = _column(p.h if p.h_lower is None else p.h_lower for p in plans)
        self._planned = _column(0.0 if p.size is None else p.size - 1 for p in plans)
        self._start = _column(p.head_start for p in plans)
        self._hold = _flags(p.hold for p in plans)
        self._up, self._down = _sides(plans)
        self._upper = np.broadcast_to(self._start * self._h, (len(plans), drifts)).copy()
        self._lower = np.broadcast_to(self._start * self._h_lower, (len(plans), drifts)).copy()

    def step(self, columns: Columns, at: int) -> tuple[Mask, Mask]:
        """C ← max(0, C ± w(y − k))."""
        freedom = columns.freedom[at]
        there = columns.there[at] & (freedom > 0)
        weight = np.where(self._planned > 0, freedom / np.maximum(self._planned, 1.0), 1.0)
        ratio = columns.ratio[at]
        upper = np.maximum(self._upper + weight * (ratio - self._k), 0.0)
        lower = np.maximum(self._lower + weight * (self._k_lower - ratio), 0.0)
        above = (upper > self._h) & there & self._up
        below = (lower > self._h_lower) & there & self._down
        start = self._start
        self._upper = _go_on(self._upper, upper, above & ~self._hold, start * self._h, there)
        self._lower = _go_on(self._lower, lower, below & ~self._hold, start * self._h_lower, there)
        return above, below


class EwmaBank(_Settings):
    """EWMAs of means."""

    _arrays = ("_lam", "_width", "_clip", "_settled", "_hold", "_average", "_variance", "_up",
               "_down")  # fmt: skip

    def __init__(self, plans: Sequence[EwmaPlan], drifts: int) -> None:
        self._lam, self._width = _column(p.lam for p in plans), _column(p.width for p in plans)
        self._clip = _column(np.inf if p.clip is None else p.clip for p in plans)
        self._settled = _flags(p.asymptotic for p in plans)
        self._hold = _flags(p.hold for p in plans)
        self._up, self._down = _sides(plans)
        self._average = np.zeros((len(plans), drifts))
        self._variance = np.zeros((len(plans), drifts))

    def step(self, columns: Columns, at: int) -> tuple[Mask, Mask]:
        """z ← λx + (1−λ)z, V ← λ²·SE² + (1−λ)²·V; one that signals goes to its centre."""
        there, error, lam = columns.there[at], columns.error[at], self._lam
        reach = self._clip * error
        average = lam * np.clip(columns.away[at], -reach, reach) + (1 - lam) * self._average
        variance = (lam * error) ** 2 + (1 - lam) ** 2 * self._variance
        variance = np.where(self._settled, lam / (2 - lam) * error**2, variance)
        reach = self._width * np.sqrt(variance)
        above = (average > reach) & there & self._up
        below = (average < -reach) & there & self._down
        again = (above | below) & ~self._hold
        self._average = _go_on(self._average, average, again, 0.0, there)
        self._variance = _go_on(self._variance, variance, again, 0.0, there)
        return above, below


class ShewhartBank(_Settings):
    """Shewhart charts of means, rule outside."""

    _arrays = ("_width", "_up", "_down")

    def __init__(self, plans: Sequence[ShewhartPlan], drifts: int) -> None:
        self._width = _column(p.width for p in plans)
        self._up, self._down = _sides(plans)

    def step(self, columns: Columns, at: int) -> tuple[Mask, Mask]:
        """One point beyond the limits."""
        there, away = columns.there[at], columns.away[at]
        reach = self._width * columns.error[at]
        return (away > reach) & there & self._up, (away < -reach) & there & self._down


def bank(plans: Sequence[Scheme], drifts: int) -> Bank:
    """The bank for plans that are all of one class and chart, all at rest."""
    cusums = [p for p in plans if isinstance(p, CusumPlan)]
    if cusums:
        if cusums[0].chart == "variance":
            return VarianceBank(cusums, drifts)
        return CusumBank(cusums, drifts)
    ewmas = [p for p in plans if isinstance(p, EwmaPlan)]
    if ewmas:
        return EwmaBank(ewmas, drifts)
    return ShewhartBank([p for p in plans if isinstance(p, ShewhartPlan)], drifts)


def warm(detectors: Bank, columns: Columns) -> None:
    """Step through what came before the drifts; what it signals there is a false alarm, restarts
    and all."""
    for at in range(len(columns)):
        detectors.step(columns, at)


def first_signals(
    detectors: Bank, columns: Columns, side: NDArray[np.int8], settings: int
) -> Places:
    """The step at which each of ``settings`` first signals in each drift, −1 where it never does.

    ``side`` of each drift: 1 upwards, −1 downwards; 0 takes a signal on either side. ``detectors``
    are used up.
    """
    drifts = len(side)
    first = np.full((settings, drifts), -1, np.int64)
    rows = np.arange(settings)
    there = np.flatnonzero(columns.there.any(axis=1))
    for at in there.tolist():
        above, below = detectors.step(columns, at)
        caught = (above & (side >= 0)) | (below & (side <= 0))
        open_now = first[rows]
        first[rows] = np.where(caught & (open_now < 0), at, open_now)
        if at % 16 == 15:
            going = (first[rows] < 0).any(axis=1)
            if not going.any():
                break
            if going.sum() < 0.8 * len(rows):
                detectors.keep(np.flatnonzero(going))
                rows = rows[going]
    return first


def _column(values: Iterable[float]) -> Values:
    return np.array(list(values), np.float64)[:, None]


def _flags(values: Iterable[bool]) -> Mask:
    return np.array(list(values), np.bool_)[:, None]


def _sides(plans: Sequence[Scheme]) -> tuple[Mask, Mask]:
    return (
        _flags(p.direction != "down" for p in plans),
        _flags(p.direction != "up" for p in plans),
    )


def _go_on(
    before: Values, after: Values, again: Mask, start: Values | float, there: Mask
) -> Values:
    """The state after a step: at its start where it signalled, as before where there was none."""
    state = np.where(again, start, after) if again.any() else after
    return state if there.all() else np.where(there, state, before)
