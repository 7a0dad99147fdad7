"""The keys of detectors and of the rules on a chart.

Knows each kind's constants and which charts suit which subgroups. Must not know the readings.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, ValidationInfo, field_validator

from monitor.configuration.presets import PRESETS, as_written, preset
from monitor.configuration.problems import Path
from monitor.configuration.sections.base import Section, either, fault, faults
from monitor.configuration.sections.scalars import Name, Number, Positive, Whole
from monitor.configuration.sections.subgroup import Subgroup
from monitor.detectors.charts import SPREAD
from monitor.plan import Side

_WIDTH = "a number of standard errors above 0, such as 3"


class OutsideRule(Section):
    """One point beyond the limits; the width is the detector's unless given."""

    rule: Literal["outside"]
    width: Positive | None = Field(default=None, description=_WIDTH)


class ZoneRule(Section):
    """``count`` of the last ``of`` points beyond ``width``."""

    rule: Literal["zone"]
    count: Whole = Field(ge=1, le=1_000, description="how many of the last points, such as 2")
    of: Whole = Field(ge=1, le=1_000, description="how many points are looked at, such as 3")
    width: Positive = Field(description="a number of standard errors above 0, such as 2")

    @field_validator("of")
    @classmethod
    def _enough(cls, value: int, info: ValidationInfo) -> int:
        if value < info.data.get("count", 0):
            raise fault("is less than count", "write as many points as count, or more")
        return value


class RunRule(Section):
    """Points in a row on one side."""

    rule: Literal["run"]
    length: Whole = Field(ge=2, le=1_000, description="how many points in a row, such as 8")


class TrendRule(Section):
    """Points in a row rising or falling."""

    rule: Literal["trend"]
    length: Whole = Field(ge=3, le=1_000, description="how many points in a row, such as 6")


class AlternationRule(Section):
    """Points in a row alternating."""

    rule: Literal["alternation"]
    length: Whole = Field(ge=3, le=1_000, description="how many points in a row, such as 14")


class StratificationRule(Section):
    """Points in a row inside."""

    rule: Literal["stratification"]
    length: Whole = Field(ge=2, le=1_000, description="how many points in a row, such as 15")
    width: Positive = Field(description="a number of standard errors above 0, such as 1")


class MixtureRule(Section):
    """Points in a row outside, on either side."""

    rule: Literal["mixture"]
    length: Whole = Field(ge=2, le=1_000, description="how many points in a row, such as 8")
    width: Positive = Field(description="a number of standard errors above 0, such as 1")


Rule = Annotated[
    OutsideRule
    | ZoneRule
    | RunRule
    | TrendRule
    | AlternationRule
    | StratificationRule
    | MixtureRule,
    Field(discriminator="rule"),
]


def _spelt_out(value: object) -> object:
    """A preset as the list it stands for; a bare rule name as a rule without parameters."""
    if isinstance(value, list):
        return [{"rule": str(each)} if isinstance(each, str) else each for each in value]
    if not isinstance(value, str):
        return value
    if value not in PRESETS:
        raise fault("is no preset", f"write a list of rules, or {either(PRESETS)}")
    # Without a width the outer rule takes the detector's.
    return [as_written(rule) for rule in preset(value, 0.0)]


class Detector(Section):
    """What all detectors share."""

    name: Name | None = Field(None, description="a name of letters, digits, _ and -")
    direction: Side = Field("both", description="both, up or down")


class ShewhartDetector(Detector):
    """A Shewhart chart."""

    kind: Literal["shewhart"]
    chart: Literal["mean", "median", "range", "sd", "individual", "moving_range"] | None = Field(
        None, description="mean, median, range, sd, individual or moving_range"
    )
    rules: Annotated[list[Rule], BeforeValidator(_spelt_out)] = Field(
        [OutsideRule(rule="outside")],
        min_length=1,
        description="a preset, or a list such as [{rule: outside}, {rule: run, length: 8}]",
    )
    width: Positive | None = Field(None, description=_WIDTH)


class CusumDetector(Detector):
    """A tabular CUSUM."""

    kind: Literal["cusum"]
    chart: Literal["mean", "individual"] | None = Field(None, description="mean or individual")
    k: Number = Field(
        ge=0, description="half the shift to be caught, in standard errors, such as 0.5"
    )
    h: Positive = Field(description="the decision interval in standard errors, such as 5")
    head_start: Number = Field(0.0, ge=0, lt=1, description="a fraction of h from 0 up, below 1")
    clip: Positive | None = Field(
        None, description="the largest standardised input that counts in full, such as 3"
    )
    after_signal: Literal["restart", "hold"] = Field("restart", description="restart or hold")

    @field_validator("clip")
    @classmethod
    def _leaves_room(cls, value: float | None, info: ValidationInfo) -> float | None:
        if value is not None and value <= info.data.get("k", 0):
            raise fault(
                "is not above k, so no sum could ever grow", "write a larger clip, such as 3"
            )
        return value


class EwmaDetector(Detector):
    """An EWMA."""

    kind: Literal["ewma"]
    chart: Literal["mean", "individual"] | None = Field(None, description="mean or individual")
    lam: Number = Field(
        alias="lambda", gt=0, le=1, description="a weight above 0, up to 1, such as 0.2"
    )
    width: Positive = Field(3.0, description=_WIDTH)
    limits: Literal["exact", "asymptotic"] = Field("exact", description="exact or asymptotic")
    clip: Positive | None = Field(
        None, description="the largest standardised input that counts in full, such as 3"
    )
    after_signal: Literal["restart", "hold"] = Field("restart", description="restart or hold")

    @field_validator("clip")
    @classmethod
    def _leaves_room(cls, value: float | None, info: ValidationInfo) -> float | None:
        lam, width = info.data.get("lam"), info.data.get("width")
        if value is None or lam is None or width is None:
            return value
        # Inputs at the clip for ever take the average to clip, its limit to width·√(λ/(2−λ)).
        if value <= width * (lam / (2.0 - lam)) ** 0.5:
            raise fault(
                "is so small that the average could never reach its limit",
                "write a larger clip, such as 3, or a smaller width",
            )
        return value


AnyDetector = ShewhartDetector | CusumDetector | EwmaDetector


def default_chart(subgroup: Subgroup) -> Literal["mean", "individual"]:
    """What is charted where no chart is named."""
    return "individual" if subgroup.single else "mean"


def fits(detector: AnyDetector, info: ValidationInfo) -> AnyDetector:
    """The chart must suit the subgroup, and the rules the chart."""
    subgroup: Subgroup | None = info.data.get("subgroup")
    chart = detector.chart
    found: list[tuple[Path, str, str]] = []
    if subgroup and chart in ("range", "sd") and subgroup.least < 2:
        instead = "write a larger subgroup size, or moving_range"
        if subgroup.window is not None:
            instead = "write min_size: 2 or more in subgroup"
        found.append((("chart",), "needs two readings or more", instead))
    if subgroup and chart in ("individual", "moving_range") and not subgroup.single:
        instead = f"write {'mean' if chart == 'individual' else 'range'}, or subgroup size 1"
        found.append((("chart",), "needs subgroups of size 1", instead))
    if isinstance(detector, ShewhartDetector) and chart in SPREAD:
        strange = sorted({rule.rule for rule in detector.rules} - {"outside"})
        if strange:
            wrong = f"holds {', '.join(strange)}, where a {chart} chart takes the rule outside only"
            found.append((("rules",), wrong, "write outside-limits, or leave rules out"))
    if found:
        raise faults(found)
    return detector
