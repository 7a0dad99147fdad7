"""The keys of a characteristic: what is measured, how it is judged and what to do about it.

Knows how its parts must suit each other. Must not know other characteristics.
"""

from __future__ import annotations

import re
from typing import Annotated

from pydantic import (
    AfterValidator,
    BeforeValidator,
    Field,
    ValidationInfo,
    field_validator,
    model_validator,
)

from monitor import stream_names
from monitor.configuration.asked import Asked, by_intent
from monitor.configuration.problems import Path
from monitor.configuration.sections.base import Section, either, fault, faults
from monitor.configuration.sections.baseline import Baseline
from monitor.configuration.sections.detectors import AnyDetector, fits
from monitor.configuration.sections.promise import Promise
from monitor.configuration.sections.scalars import LINE, Line, Number, Positive
from monitor.configuration.sections.source import Source
from monitor.configuration.sections.subgroup import Subgroup
from monitor.plan import BaselinePlan, Intent, Priority
from monitor.solving import UnsolvableError, solved

_BRACED = re.compile(r"\{([^{}]*)\}")
_PRIORITY = "low, medium or high, or a mapping such as {down: high, up: medium}"
_REACTION = "a list of texts, or a mapping of up, down and other to such lists"


class Specification(Section):
    """The product's tolerance."""

    lower: Number | None = Field(None, description="the lower specification limit")
    upper: Number | None = Field(None, description="the upper specification limit")
    nominal: Number | None = Field(None, description="the nominal value")

    @field_validator("upper", "nominal")
    @classmethod
    def _in_order(cls, value: float | None, info: ValidationInfo) -> float | None:
        lower, upper = info.data.get("lower"), info.data.get("upper")
        if value is None:
            return value
        if (lower is not None and value < lower) or (upper is not None and value > upper):
            raise fault("is out of order", "write lower, nominal and upper in their order")
        return value


class PriorityByDirection(Section):
    """How urgent a rise, a fall, and a signal without a side are."""

    up: Priority | None = Field(default=None, description=_PRIORITY)
    down: Priority | None = Field(default=None, description=_PRIORITY)
    other: Priority | None = Field(default=None, description=_PRIORITY)


class ReactionByDirection(Section):
    """What to do about a rise, a fall, and a signal without a side."""

    up: list[Line] | None = Field(default=None, description=_REACTION)
    down: list[Line] | None = Field(default=None, description=_REACTION)
    other: list[Line] | None = Field(default=None, description=_REACTION)


def _spread_sides(value: object) -> object:
    return value if isinstance(value, dict) else dict.fromkeys(("up", "down", "other"), value)


def _below(place: Path, found: list[tuple[Path, str, str]]) -> list[tuple[Path, str, str]]:
    return [((*place, *path), wrong, instead) for path, wrong, instead in found]


class Characteristic(Section):
    """One measured quantity on one line. Source and subgroup come first: what follows is held
    against them."""

    title: Line | None = Field(None, description="a title for people, such as Net weight")
    unit: Annotated[str, Field(pattern=LINE)] = Field("", description="the unit, such as g")
    resolution: Positive | None = Field(
        None, description="the gauge's smallest step in its unit, such as 0.1"
    )
    specification: Specification | None = Field(
        None, description="the tolerance, such as {nominal: 340, lower: 331, upper: 352}"
    )
    source: Source = Field(
        description="where readings come from: {topic: …, payload: json, value: …}"
    )
    subgroup: Subgroup = Field(
        Subgroup(),
        description="how readings are gathered, such as {size: 5, max_gap: 30s}",
    )
    baseline: Baseline = Field(
        description="the frozen centre and spread, such as {mean: 341.2, sigma: 1.9}, or "
        "{file: …}, or {learn: 1000} where none is known yet"
    )
    promise: Promise | None = Field(
        None, description="how often it may ring with nothing wrong: {false_alarm_every: 14d}"
    )
    detectors: list[Annotated[AnyDetector, Field(discriminator="kind"), AfterValidator(fits)]] = (
        Field(
            min_length=1,
            description="a list such as [{kind: shewhart}, {kind: cusum, k: 0.5, h: 5}]",
        )
    )
    priority: Annotated[PriorityByDirection, BeforeValidator(_spread_sides)] = Field(
        PriorityByDirection(), description=_PRIORITY
    )
    reaction: Annotated[ReactionByDirection, BeforeValidator(_spread_sides)] = Field(
        ReactionByDirection(), description=_REACTION
    )

    @field_validator("baseline")
    @classmethod
    def _of_its_streams(cls, value: Baseline, info: ValidationInfo) -> Baseline:
        place: Path = ("file",) if value.file else ()
        found: list[tuple[Path, str, str]] = []
        unit = value.file and value.file.unit
        if unit is not None and unit != info.data.get("unit", unit):
            found.append(((*place, "unit"), "is not the characteristic's unit", "mend one of them"))
        source: Source | None = info.data.get("source")
        keys = sorted(source.keys()) if source else []
        if source and not keys and value.given.by_stream:
            wrong, instead = "needs stream keys in source", "write mean: and sigma: alone"
            found.append(((*place, "by_stream"), wrong, instead))
        for name in value.given.by_stream if keys else ():
            if [key for key, _ in stream_names.parse(name)] != keys:
                wrong = f"is no stream of this characteristic, whose keys are {', '.join(keys)}"
                instead = f"write it as {';'.join(f'{key}=…' for key in keys)}"
                found.append(((*place, "by_stream", name), wrong, instead))
        if found:
            raise faults(found)
        return value

    @model_validator(mode="after")
    def _can_be_solved(self) -> Characteristic:
        """Whatever is asked of detectors can be done, on the baseline of every stream."""
        asked = Asked(self.source, self.subgroup, self.baseline, self.promise, self.detectors)
        found: list[tuple[Path, str, str]] = []
        if self.promise and any(by_intent(each, self.promise) for each in self.detectors):
            place: Path = ("promise", "false_alarm_every")
            found += _below(place, asked.promise_faults())
        for index, detector in enumerate(self.detectors):
            wrong = asked.faults(detector)
            if not (found or wrong):
                wrong = self._unsolvable(asked.intent(detector))
            found += _below(("detectors", index), wrong)
        if found:
            raise faults(found)
        return self

    def _unsolvable(self, intent: Intent | None) -> list[tuple[Path, str, str]]:
        """Why the first baseline that has none has no constants."""
        given = self.baseline.given
        for name, each in [("", given.common), *given.by_stream.items()] if intent else ():
            if intent is None or each is None:
                continue
            try:
                solved(intent, BaselinePlan(each.mean, each.sigma, each.sigma_between, ""))
            except UnsolvableError as error:
                of = f", in stream {name}" if name else ""
                return [((error.key,) if error.key else (), error.wrong + of, error.instead)]
        return []

    @field_validator("reaction")
    @classmethod
    def _names_stream_keys(
        cls, value: ReactionByDirection, info: ValidationInfo
    ) -> ReactionByDirection:
        source: Source | None = info.data.get("source")
        if source is None:
            return value
        keys = source.keys()
        known = (
            f"write {either([f'{{{key}}}' for key in keys])}" if keys else "leave the braces out"
        )
        found: list[tuple[Path, str, str]] = []
        for side, steps in (("up", value.up), ("down", value.down), ("other", value.other)):
            for index, step in enumerate(steps or ()):
                strange = [name for name in _BRACED.findall(step) if name not in keys]
                if strange:
                    wrong = f"names {{{strange[0]}}}, which is no stream key of this characteristic"
                elif set("{}") & set(_BRACED.sub("", step)):
                    wrong = "has a brace without its partner"
                else:
                    continue
                found.append(((side, index), wrong, known))
        if found:
            raise faults(found)
        return value
