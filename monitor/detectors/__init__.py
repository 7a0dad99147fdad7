"""Detectors: one module each, found by the plan they carry out.

Knows which class carries out which scheme. Must not know streams or alerts.
"""

from __future__ import annotations

from monitor.detectors.base import Detector, Signal
from monitor.detectors.cusum import Cusum
from monitor.detectors.ewma import Ewma
from monitor.detectors.shewhart import Shewhart
from monitor.detectors.variance_cusum import VarianceCusum
from monitor.plan import BaselinePlan, CusumPlan, DetectorPlan, EwmaPlan, ShewhartPlan

__all__ = ["Detector", "Signal", "detector"]


def detector(plan: DetectorPlan, baseline: BaselinePlan) -> Detector:
    """A fresh detector as planned."""
    match plan.scheme:
        case ShewhartPlan() as scheme:
            return Shewhart(scheme, baseline)
        case CusumPlan(chart="variance") as scheme:
            return VarianceCusum(scheme, baseline)
        case CusumPlan() as scheme:
            return Cusum(scheme, baseline)
        case EwmaPlan() as scheme:
            return Ewma(scheme, baseline)
