"""The keys of detectors and of the rules on a chart.

Knows each kind's constants and which charts suit which subgroups. Must not know the readings.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, ValidationInfo, field_validator, model_validator

from monitor.configuration.presets import PRESETS, as_written, preset
from monitor.configuration.problems import Path
from monitor.configuration.sections.base import Section, either, fault, faults
from monitor.configuration.sections.scalars import Name, Number, Positive, Whole
from monitor.configuration.sections.subgroup import Subgroup
from monitor.detectors.charts import SPREAD
from monitor.methods.limits import WIDEST
from monitor.plan import Side

WIDTH = 3.0
"""Of limits, in standard errors, where neither a width nor a promise is written."""

_BOTH_HIGH = 0.8
"""Of a head start: up to it the run lengths of two sums of variances are known."""

_WIDTH = "a number of standard errors above 0, such as 3"
_CATCH = "the smallest drift worth catching, in the gauge's unit, such as 1.5"
_IGNORE = "the drift to leave alone, in the gauge's unit, such as 0.3"
_CATCH_RATIO = "how many times as large a spread is worth catching, such as 1.5"


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
    share: Positive = Field(
        1.0, description="how much of the promise it gets where others get 1, such as 2"
    )


class ShewhartDetector(Detector):
    """A Shewhart chart."""

    kind: Literal["shewhart"]
    chart: (
        Literal["mean", "median", "range", "sd", "variance", "individual", "moving_range"] | None
    ) = Field(None, description="mean, median, range, sd, variance, individual or moving_range")
    limits: Literal["exact", "symmetric"] | None = Field(
        None, description="exact or symmetric, on a chart of spread"
    )
    rules: Annotated[list[Rule], BeforeValidator(_spelt_out)] = Field(
        [OutsideRule(rule="outside")],
        min_length=1,
        description="a preset, or a list such as [{rule: outside}, {rule: run, length: 8}]",
    )
    width: Positive | None = Field(None, description=_WIDTH)

    @model_validator(mode="after")
    def _limits_suit_the_chart(self) -> ShewhartDetector:
        found: list[tuple[Path, str, str]] = []
        if self.limits is not None and self.chart not in SPREAD:
            wrong = "is for charts of spread, whose limits need not lie evenly about the centre"
            found.append((("limits",), wrong, "leave limits out, or write chart: range or sd"))
        if self.limits == "symmetric" and self.chart == "variance":
            wrong = "would be crossed far too often above: a variance's limits are always exact"
            found.append((("limits",), wrong, "leave limits out, or write chart: sd"))
        if self.exact:
            wide: list[Path] = [("width",)] if self.width and self.width > WIDEST else []
            wide += [
                ("rules", index, "width")
                for index, rule in enumerate(self.rules)
                if isinstance(rule, OutsideRule) and rule.width and rule.width > WIDEST
            ]
            wrong = f"is more than {WIDEST:g}, beyond which exact limits are not worked out"
            found += [(path, wrong, "write a smaller width, such as 3") for path in wide]
        if found:
            raise faults(found)
        return self

    @property
    def exact(self) -> bool:
        """Whether limits are crossed as often as those of a normal statistic."""
        return self.limits == "exact" or self.chart == "variance"


class CusumDetector(Detector):
    """A tabular CUSUM."""

    kind: Literal["cusum"]
    chart: Literal["mean", "individual", "variance"] | None = Field(
        None, description="mean, individual or variance"
    )
    catch: Positive | None = Field(None, description=_CATCH)
    ignore: Number = Field(0.0, ge=0, description=_IGNORE)
    catch_ratio: Positive | None = Field(None, description=_CATCH_RATIO)
    k: Number | None = Field(
        None, ge=0, description="half the shift to be caught, in standard errors, such as 0.5"
    )
    h: Positive | None = Field(
        None, description="the decision interval in standard errors, such as 5"
    )
    head_start: Number = Field(0.0, ge=0, lt=1, description="a fraction of h from 0 up, below 1")
    clip: Positive | None = Field(
        None, description="the largest standardised input that counts in full, such as 3"
    )
    after_signal: Literal["restart", "hold"] = Field("restart", description="restart or hold")

    @field_validator("clip")
    @classmethod
    def _leaves_room(cls, value: float | None, info: ValidationInfo) -> float | None:
        if value is not None and value <= (info.data.get("k") or 0):
            raise fault(
                "is not above k, so no sum could ever grow", "write a larger clip, such as 3"
            )
        return value

    @model_validator(mode="after")
    def _constants_or_intent(self) -> CusumDetector:
        found = _intent(self, {"k": self.k, "h": self.h}, ratio=self.catch_ratio)
        of_spread = self.chart == "variance"
        if self.catch_ratio is not None and not of_spread:
            instead = "write chart: variance, or catch: for a drift of the mean"
            found.append((("catch_ratio",), "is for the spread", instead))
        elif self.catch_ratio == 1:
            instead = "write how many times as large, such as 1.5"
            found.append((("catch_ratio",), "is no change of the spread", instead))
        if self.catch is not None and of_spread:
            instead = "write catch_ratio: how many times as large the spread, such as 1.5"
            found.append((("catch",), "is for a drift of the mean", instead))
        if of_spread:
            found += self._of_variance()
        if found:
            raise faults(found)
        if not self.by_intent:
            _complete({"k": self.k, "h": self.h}, "k: 0.5 and h: 5")
        return self

    def _of_variance(self) -> Iterator[tuple[Path, str, str]]:
        if self.clip is not None:
            wrong = "would hide what a chart of the variance is there to see"
            yield ("clip",), wrong, "leave clip out"
        if self.k is not None and self.direction == "both" and "direction" in self.model_fields_set:
            wrong = "needs a k for each side, and only one is written"
            instead = "write up or down, or catch_ratio: for both with a promise"
            yield ("direction",), wrong, instead
        elif self.k is not None and not (self.k > 1 if self.watched == "up" else 0 < self.k < 1):
            # In multiples of the usual variance, which sums would otherwise drift up from.
            room = "above 1" if self.watched == "up" else "above 0 and below 1"
            wrong = f"is not {room}, so that the sum would rise with nothing wrong"
            yield ("k",), wrong, f"write k {room} for {self.watched}, such as {self._usual_k}"
        if self.watched == "both" and self.head_start > _BOTH_HIGH:
            wrong = f"is more than {_BOTH_HIGH:g}: both sums would be high at first, and ring often"
            yield ("head_start",), wrong, "write a smaller one, such as 0.5"
        if self.catch_ratio is not None and self.watched == "up" and self.catch_ratio < 1:
            wrong = "is a spread that shrinks, and only one that grows is watched"
            yield ("catch_ratio",), wrong, "write direction: down, or a ratio above 1"

    @property
    def _usual_k(self) -> float:
        return 1.46 if self.watched == "up" else 0.65

    @property
    def by_intent(self) -> bool:
        """Whether k and h are to be worked out."""
        return self.catch is not None or self.catch_ratio is not None

    @property
    def watched(self) -> Side:
        """The sides watched: of the spread, where no direction is written, the one to catch."""
        if self.chart != "variance" or "direction" in self.model_fields_set:
            return self.direction
        return "up" if (self.catch_ratio or self.k or 1.0) >= 1.0 else "down"


class EwmaDetector(Detector):
    """An EWMA."""

    kind: Literal["ewma"]
    chart: Literal["mean", "individual"] | None = Field(None, description="mean or individual")
    catch: Positive | None = Field(None, description=_CATCH)
    ignore: Number = Field(0.0, ge=0, description=_IGNORE)
    lam: Number | None = Field(
        None, alias="lambda", gt=0, le=1, description="a weight above 0, up to 1, such as 0.2"
    )
    width: Positive | None = Field(None, description=_WIDTH)
    limits: Literal["exact", "asymptotic"] = Field("exact", description="exact or asymptotic")
    clip: Positive | None = Field(
        None, description="the largest standardised input that counts in full, such as 3"
    )
    after_signal: Literal["restart", "hold"] = Field("restart", description="restart or hold")

    @field_validator("clip")
    @classmethod
    def _leaves_room(cls, value: float | None, info: ValidationInfo) -> float | None:
        lam, width = info.data.get("lam"), info.data.get("width") or WIDTH
        if value is None or lam is None:
            return value
        # Inputs at the clip for ever take the average to clip, its limit to width·√(λ/(2−λ)).
        if value <= width * (lam / (2.0 - lam)) ** 0.5:
            raise fault(
                "is so small that the average could never reach its limit",
                "write a larger clip, such as 3, or a smaller width",
            )
        return value

    @model_validator(mode="after")
    def _constants_or_intent(self) -> EwmaDetector:
        if found := _intent(self, {"lambda": self.lam, "width": self.width}):
            raise faults(found)
        if not self.by_intent:
            _complete({"lambda": self.lam}, "lambda: 0.2 and width: 2.962")
        return self

    @property
    def by_intent(self) -> bool:
        """Whether lambda and width are to be worked out."""
        return self.catch is not None


def _intent(
    detector: CusumDetector | EwmaDetector,
    constants: dict[str, float | None],
    ratio: float | None = None,
) -> list[tuple[Path, str, str]]:
    """What is wrong between what is to be caught and the constants that would be worked out."""
    found: list[tuple[Path, str, str]] = []
    told = "catch" if detector.catch is not None else "catch_ratio"
    caught = detector.catch if ratio is None else ratio
    if caught is not None:
        for key, value in constants.items():
            if value is not None:
                wrong = f"stands beside {told}, which it would be worked out from"
                found.append(((key,), wrong, f"keep {told} or {' and '.join(constants)}"))
    if detector.ignore and detector.catch is None:
        instead = "write catch: too, the smallest drift worth catching"
        found.append((("ignore",), "has no catch beside it", instead))
    elif detector.catch is not None and detector.ignore >= detector.catch:
        instead = "write the drift to leave alone, and a larger one to catch"
        found.append((("ignore",), "is not less than catch", instead))
    return found


def _complete(constants: dict[str, float | None], example: str) -> None:
    missing = [key for key, value in constants.items() if value is None]
    if missing:
        instead = f"write constants, such as {example}, or what is worth catching, with a promise"
        raise faults([((key,), "is missing", instead) for key in missing], absent=True)


AnyDetector = ShewhartDetector | CusumDetector | EwmaDetector


def default_chart(subgroup: Subgroup) -> Literal["mean", "individual"]:
    """What is charted where no chart is named."""
    return "individual" if subgroup.single else "mean"


def fits(detector: AnyDetector, info: ValidationInfo) -> AnyDetector:
    """The chart must suit the subgroup, and the rules the chart."""
    subgroup: Subgroup | None = info.data.get("subgroup")
    chart = detector.chart
    found: list[tuple[Path, str, str]] = []
    if subgroup and chart in ("range", "sd", "variance") and subgroup.least < 2:
        instead = "write a larger subgroup size"
        instead += ", or moving_range" if isinstance(detector, ShewhartDetector) else ""
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
