"""What each detector is asked to do: the promise shared out, and what is worth catching.

Knows how often subgroups come and who gets which share. Must not know how constants are worked out.

A promise is running time of the whole characteristic. False alarms of independent streams add up
exactly, those of detectors that share their readings a little less: so each detector gets its share
of the rate, and each stream and side rings as often as its subgroups come (methods, "From intent to
constants").
"""

from __future__ import annotations

import math

from monitor import times
from monitor.configuration import pace
from monitor.configuration.problems import Path
from monitor.configuration.sections.baseline import Baseline
from monitor.configuration.sections.detectors import (
    AnyDetector,
    CusumDetector,
    EwmaDetector,
    OutsideRule,
    ShewhartDetector,
    default_chart,
)
from monitor.configuration.sections.promise import Promise
from monitor.configuration.sections.source import Source
from monitor.configuration.sections.subgroup import Subgroup
from monitor.plan import ByCount, ByWindow, Chart, Intent, SubgroupPlan

Found = tuple[Path, str, str]


def by_intent(detector: AnyDetector, promise: Promise | None) -> bool:
    """Whether its constants are to be worked out rather than read."""
    if isinstance(detector, ShewhartDetector):
        written = detector.width or any(
            isinstance(rule, OutsideRule) and rule.width for rule in detector.rules
        )
        return promise is not None and not written
    return detector.by_intent


def planned(subgroup: Subgroup) -> SubgroupPlan:
    """How readings are gathered, as the engine takes it."""
    if subgroup.window is not None:
        return ByWindow(subgroup.window, subgroup.min_size)
    return ByCount(subgroup.size, subgroup.max_gap, subgroup.every)


class Asked:
    """What is asked of the detectors of one characteristic, by its sections."""

    def __init__(
        self,
        source: Source,
        subgroup: Subgroup,
        baseline: Baseline,
        promise: Promise | None,
        detectors: list[AnyDetector],
    ) -> None:
        self._source, self._subgroup, self._promise = source, subgroup, promise
        self._shares = math.fsum(each.share for each in detectors)
        gathered, rate, among = planned(subgroup), source.expected_rate, _shared(source, baseline)
        self._size = pace.usual_size(gathered, rate, among)
        self._pace = pace.usual_pace(gathered, rate, among)
        self._knows_size = isinstance(gathered, ByCount) or rate is not None

    @property
    def size(self) -> int:
        """Readings in a usual subgroup."""
        return self._size

    def promise_faults(self) -> list[Found]:
        """Why the promise cannot be turned into a number of subgroups."""
        if self._pace is None:
            wrong = "is a time, and nobody wrote down how many readings come in it"
            return [((), wrong, "write expected_rate: in source, such as 600/min")]
        if self._pace.each:
            wrong = "is of all streams together, and nobody wrote down how many there are"
            return [((), wrong, "write expected_streams: in source, such as 6")]
        if not self._knows_size:
            wrong = "takes limits for usual windows, and nobody wrote down how many readings come"
            return [((), wrong, "write expected_rate: in source, such as 600/min")]
        return []

    def faults(self, detector: AnyDetector) -> list[Found]:
        """What stands in the way of working the detector's constants out, but for its baseline."""
        if self._promise is None:
            if isinstance(detector, ShewhartDetector) or not detector.by_intent:
                return []
            key = "catch" if detector.catch is not None else "catch_ratio"
            instead = "write promise: {false_alarm_every: 14d} in the characteristic"
            return [((key,), "has no promise to work constants out from", instead)]
        if isinstance(detector, ShewhartDetector) and by_intent(detector, self._promise):
            strange = sorted({rule.rule for rule in detector.rules} - {"outside"})
            if strange:
                wrong = f"holds {', '.join(strange)}, which ring as often as they do"
                return [(("rules",), wrong, "write width: 3 too, or leave rules out")]
            if detector.limits == "symmetric":
                wrong = "cannot keep a promise on each side: that takes exact limits"
                return [(("limits",), wrong, "write limits: exact, or a width")]
        return []

    def intent(self, detector: AnyDetector) -> Intent | None:
        """What the detector is asked; None where its constants are written down.

        Only of what has no faults.
        """
        promise, coming = self._promise, self._pace
        if promise is None or coming is None or not by_intent(detector, promise):
            return None
        chart: Chart = detector.chart or default_chart(self._subgroup)
        seconds = promise.false_alarm_every / times.SECOND * self._shares / detector.share
        interval = seconds / coming.seconds
        match detector:
            case ShewhartDetector():
                side = detector.direction
                return Intent("shewhart", chart, interval, self._size, direction=side)
            case CusumDetector():
                return Intent(
                    "cusum",
                    chart,
                    interval,
                    self._size,
                    detector.catch,
                    detector.ignore,
                    detector.catch_ratio,
                    detector.watched,
                    detector.head_start,
                    detector.clip,
                    detector.after_signal == "hold",
                )
            case EwmaDetector():
                return Intent(
                    "ewma",
                    chart,
                    interval,
                    self._size,
                    detector.catch,
                    detector.ignore,
                    direction=detector.direction,
                    clip=detector.clip,
                    hold=detector.after_signal == "hold",
                    asymptotic=detector.limits == "asymptotic",
                )


def _shared(source: Source, baseline: Baseline) -> pace.Shared:
    values = baseline.given
    only_those = values.common is None and not (baseline.learn and baseline.adopt)
    named = len(values.by_stream)
    return pace.shared(bool(source.keys()), named, only_those, source.expected_streams)
