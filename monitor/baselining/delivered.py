"""What detectors deliver of their promise if the baseline is a little wrong, as every estimate is.

Knows run lengths. Must not know verdicts or words.

The run lengths of the detectors under the errors that resamples show say what such a baseline keeps
(A. Gandy & J. T. Kvaløy 2013, Scandinavian Journal of Statistics 40: guaranteed in-control
performance by the bootstrap).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from monitor import runlengths
from monitor.baselining.estimating import Estimate
from monitor.baselining.following import OVERSHOOT, Following, widened
from monitor.baselining.material import StreamSubgroups
from monitor.baselining.resampling import RESAMPLES, Errors, resampled
from monitor.detectors.charts import SPREAD
from monitor.methods.normal import Array, sf
from monitor.methods.runlength import rules
from monitor.methods.shape import skewed_sf, tilt
from monitor.plan import CusumPlan, DetectorPlan, EwmaPlan, Scheme, ShewhartPlan, Stream

UNLUCKY = 0.10
"""The part of resamples that does worse than what is told."""

BROKEN = 0.1
"""Of the promise, below which it is none: what was to ring once in ten shifts rings in each."""

_SHIFTS, _RATIOS = 9, 5
_STREAMS = 12
"""Of so many streams the run lengths are computed; of more, of so many among them."""
_LONGEST = 1e300


@dataclass(frozen=True, slots=True)
class Delivered:
    """Parts of the promised interval between false alarms, 1 being all of it.

    ``unlucky``: what the worst tenth of such baselines falls below, all causes together; ``usual``:
    what half of them do. ``of_estimation``: the unlucky tenth's by the size of the recording alone.
    ``of_following``, ``of_skewness``: what is left of the promise, with an exact baseline, because
    successive means follow each other, and because they are skewed.
    ``subgroups``: the promised interval itself, in subgroups of all streams. ``left_out``: names of
    detectors whose run lengths take too long to compute.
    """

    unlucky: float
    usual: float
    of_estimation: float
    of_following: float
    of_skewness: float
    subgroups: float
    left_out: tuple[str, ...]

    @property
    def broken(self) -> bool:
        """Whether such a baseline may keep next to nothing."""
        return self.unlucky < BROKEN

    @property
    def rings(self) -> float:
        """Subgroups of all streams between false alarms, in the unlucky tenth."""
        return self.unlucky * self.subgroups


def delivered(
    streams: Sequence[StreamSubgroups],
    estimate: Estimate,
    detectors: Callable[[Stream], Sequence[DetectorPlan]],
    skewness: float,
) -> Delivered | None:
    """What ``detectors`` (of each stream) keep of their promise under the estimated baseline.

    ``skewness`` is that of standardised means, 0 where it is not told from none. None where nothing
    can be computed.
    """
    by_name = {each.stream: each for each in streams}
    chosen = _spread_out([each.stream for each in estimate.each], _STREAMS)
    if not any(detectors(stream) for stream in chosen):
        return None
    errors = resampled(by_name, estimate, chosen)
    means = Following(estimate.memory)
    promised = following = skewed = 0.0
    actual = np.zeros(RESAMPLES)
    estimated = np.zeros(RESAMPLES)
    left_out: dict[str, None] = {}
    for stream in chosen:
        size = max(1, round(float(np.median(by_name[stream].n))))
        weight = len(by_name[stream])
        error = (estimate.by_stream[stream] if estimate.differ else estimate.common).error(size)
        for detector in detectors(stream):
            scheme = detector.scheme
            off = 0.0 if detector.intent is None else detector.intent.ignore / error
            try:
                alone = _Surface(scheme, size, errors[stream])
                reference = alone.reference(off)
                if not math.isfinite(reference):
                    continue
                plain, exact = alone.of_errors(), alone.exact()
                followed, exactly_followed = plain, exact
                if estimate.follows and not _is_spread(scheme):
                    together = alone.following(means)
                    followed, exactly_followed = together.of_errors(), together.exact()
            except ValueError:
                left_out[detector.name] = None
                continue
            left = _skewed(scheme, skewness)
            promised += weight / reference
            estimated += weight / plain
            actual += weight / (followed * left)
            following += weight / exactly_followed
            skewed += weight / (exact * left)
    if not promised:
        return None
    return Delivered(
        min(1.0, float(np.quantile(promised / actual, UNLUCKY))),
        min(1.0, float(np.median(promised / actual))),
        min(1.0, float(np.quantile(promised / estimated, UNLUCKY))),
        min(1.0, promised / following),
        min(1.0, promised / skewed),
        sum(len(by_name[stream]) for stream in chosen) / promised,
        tuple(left_out),
    )


def _is_spread(scheme: Scheme) -> bool:
    return scheme.chart in SPREAD


def _spread_out(streams: Sequence[Stream], most: int) -> list[Stream]:
    if len(streams) <= most:
        return list(streams)
    return [streams[round(at)] for at in np.linspace(0, len(streams) - 1, most)]


class _Surface:
    """Run lengths of one scheme over the errors of its baseline, from a grid: their logarithm is
    smooth. The spread is that of means for a chart of location, of readings for one of spread."""

    def __init__(self, scheme: Scheme, size: int, errors: Errors) -> None:
        if isinstance(scheme, ShewhartPlan) and not rules.exact(scheme.rules):
            raise ValueError("its rules must be simulated")
        self._scheme, self._size = scheme, size
        self._spread = _is_spread(scheme)
        self._errors = errors
        self._wider = self._longer = 1.0

    def following(self, means: Following) -> _Surface:
        """The same on means that follow each other."""
        surface = _Surface(self._scheme, self._size, self._errors)
        surface._wider = means.wider(self._scheme)
        surface._longer = means.longer(self._scheme)
        if surface._wider != 1.0:
            # How much they follow each other is an estimate as well.
            error = self._errors.error * self._errors.inflation
            surface._errors = replace(self._errors, error=error)
        return surface

    def reference(self, off: float) -> float:
        """What is promised: while the mean is off by ``off`` standard errors to the side watched,
        with nothing else wrong."""
        return self._run_length(-off if self._scheme.direction == "down" else off, 1.0)

    def exact(self) -> float:
        """With an exact centre and spread."""
        return self._run_length(0.0, 1.0)

    def of_errors(self) -> Array:
        """Of each baseline."""
        errors = self._errors
        # Beyond the middle 98 % nothing is asked.
        shifts, ratios = (
            np.clip(each, *np.quantile(each, (0.01, 0.99)))
            for each in (errors.shift, errors.sigma if self._spread else errors.error)
        )
        over_shift = np.linspace(shifts.min(), shifts.max(), 1 if self._spread else _SHIFTS)
        over_ratio = np.linspace(ratios.min(), ratios.max(), _RATIOS)
        logs = np.log([[self._run_length(s, r) for s in over_shift] for r in over_ratio])
        rows = [
            row.repeat(len(shifts)) if self._spread else np.interp(shifts, over_shift, row)
            for row in logs
        ]
        at = np.clip(np.searchsorted(over_ratio, ratios) - 1, 0, _RATIOS - 2)
        step = over_ratio[at + 1] - over_ratio[at]
        part = np.where(step > 0, (ratios - over_ratio[at]) / np.where(step > 0, step, 1.0), 0.0)
        which, stacked = np.arange(len(ratios)), np.stack(rows)
        return np.asarray(np.exp(stacked[at, which] * (1 - part) + stacked[at + 1, which] * part))

    def _run_length(self, shift: float, ratio: float) -> float:
        scheme = widened(self._scheme, self._wider)
        found = _run_length(scheme, self._size, shift / self._wider, ratio)
        return min(self._longer * found, _LONGEST)


def _run_length(scheme: Scheme, size: int, shift: float, ratio: float) -> float:
    """On values shifted and ``ratio`` times as wide: as on standard ones with all else divided."""
    match scheme:
        case ShewhartPlan() | CusumPlan() if _is_spread(scheme):
            return runlengths.run_length(scheme, size=size, ratio=ratio).subgroups
        case CusumPlan():
            clip = None if scheme.clip is None else scheme.clip / ratio
            scheme = replace(scheme, k=scheme.k / ratio, h=scheme.h / ratio, clip=clip)
        case EwmaPlan():
            # Exact limits differ in the first few points alone.
            scheme = replace(scheme, width=scheme.width / ratio, asymptotic=True)
        case ShewhartPlan():
            narrower = tuple(replace(rule, width=rule.width / ratio) for rule in scheme.rules)
            scheme = replace(scheme, width=scheme.width / ratio, rules=narrower)
    return runlengths.run_length(scheme, shift / ratio, size=size).subgroups


def _skewed(scheme: Scheme, skewness: float) -> float:
    """What skewness of the means leaves of a run length, to a first approximation."""
    if not skewness or _is_spread(scheme):
        return 1.0
    both = scheme.direction == "both"
    signs = (1.0, -1.0) if both else (1.0,) if scheme.direction == "up" else (-1.0,)
    match scheme:
        case CusumPlan():
            reach = scheme.h + OVERSHOOT
            rates = [math.exp((2 * scheme.k - tilt(scheme.k, s * skewness)) * reach) for s in signs]
            return len(signs) / sum(rates)
        case EwmaPlan():
            lam = scheme.lam
            third = lam**3 / -math.expm1(3 * math.log1p(-lam)) if lam < 1 else 1.0
            averaged = skewness * third / (lam / (2 - lam)) ** 1.5
            width = scheme.width
        case ShewhartPlan():
            averaged = skewness
            width = min((r.width for r in scheme.rules if r.rule == "outside"), default=0.0)
            if not width:
                return 1.0
    normal = len(signs) * sf(width)
    return normal / max(sum(skewed_sf(width, s * averaged) for s in signs), normal * 1e-6)
