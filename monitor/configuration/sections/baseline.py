"""The keys of a baseline, in the configuration or in a file that says where it came from.

Knows which values a stream needs. Must not know files: one that is named has been read before.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field, ValidationInfo, field_validator, model_validator

from monitor import stream_names, times
from monitor.baselining.demands import LEAST, SHIFT
from monitor.configuration.sections.base import Section, fault, faults
from monitor.configuration.sections.scalars import (
    LINE,
    Duration,
    Flag,
    Line,
    Name,
    Number,
    Positive,
    Scalar,
    Whole,
)

MAX_STREAMS = 10_000
"""As many as a characteristic may have."""

_MEAN = "the centre in the gauge's unit, such as 341.2"
_SIGMA = "the standard deviation of single readings within a subgroup, such as 1.9"
_BETWEEN = "the standard deviation between subgroup means beyond sigma, such as 0.4, or 0"
_STREAM = "write it as the table of points does, such as head=4;lane=1"


class StreamBaseline(Section):
    """The frozen centre and spread of one stream."""

    mean: Number = Field(description=_MEAN)
    sigma: Positive = Field(description=_SIGMA)
    sigma_between: Number = Field(0.0, ge=0, description=_BETWEEN)


def _stream(value: str) -> str:
    try:
        stream_names.parse(value)
    except ValueError as error:
        raise fault(str(error), _STREAM) from None
    return value


def _told_apart(value: dict[str, StreamBaseline]) -> dict[str, StreamBaseline]:
    first: dict[object, str] = {}
    again = [n for n in value if first.setdefault(stream_names.parse(n), n) != n]
    if again:
        raise faults(
            [((n,), "is a stream that stands above", "keep one of the two") for n in again]
        )
    return value


ByStream = Annotated[
    dict[Annotated[str, AfterValidator(_stream)], StreamBaseline],
    Field(
        min_length=1,
        max_length=MAX_STREAMS,
        description="a mapping of streams to baselines, such as "
        '{"head=4;lane=1": {mean: 341.2, sigma: 1.9}}',
    ),
    AfterValidator(_told_apart),
]


class Values(Section):
    """A centre and spread for all streams, for some of them, or both."""

    by_stream: ByStream = Field(default={})
    mean: Number | None = Field(None, validate_default=True, description=_MEAN)
    sigma: Positive | None = Field(None, validate_default=True, description=_SIGMA)
    sigma_between: Number = Field(0.0, ge=0, description=_BETWEEN)

    @field_validator("mean", "sigma")
    @classmethod
    def _given(cls, value: float | None, info: ValidationInfo) -> float | None:
        # What failed its own checks is not in the data, and is not missing.
        in_file = "file" in cls.model_fields and info.data.get("file", True)
        no_mean = info.field_name == "mean" or info.data.get("mean", 0.0) is None
        if "learn" in cls.model_fields and no_mean and info.data.get("learn", 0) is not None:
            return value
        in_streams = info.data.get("by_stream", True) and no_mean
        if value is None and not in_file and not in_streams:
            hint = cls.model_fields[info.field_name or ""].description
            raise fault("is missing", f"write {hint}", absent=True)
        return value

    @field_validator("sigma", "sigma_between")
    @classmethod
    def _beside_a_mean(cls, value: float | None, info: ValidationInfo) -> float | None:
        if value is not None and info.data.get("mean", 0.0) is None and not info.data.get("file"):
            raise fault("has no mean beside it", "write mean: too")
        return value

    @property
    def common(self) -> StreamBaseline | None:
        """What holds for every stream without a baseline of its own."""
        if self.mean is None or self.sigma is None:
            return None
        return StreamBaseline(mean=self.mean, sigma=self.sigma, sigma_between=self.sigma_between)


class Recording(Section):
    """A recording that a baseline was estimated from."""

    name: Line = Field(description="the recording's file name, such as week-9.jsonl.gz")
    sha256: Annotated[str, Field(pattern=r"^[0-9a-f]{64}$")] = Field(
        description="the 64 hexadecimal digits of the file's SHA-256"
    )


class Counts(Section):
    """How much a baseline was estimated from."""

    readings: Whole | None = Field(default=None, ge=0, description="how many readings were used")
    set_aside: Whole | None = Field(default=None, ge=0, description="how many were set aside")
    subgroups: Whole | None = Field(default=None, ge=0, description="how many subgroups they made")
    streams: Whole | None = Field(default=None, ge=0, description="how many streams they came from")


def _instant(value: str) -> str:
    try:
        times.parse_iso_time(value)
    except (ValueError, OverflowError):
        raise fault("is no time with an offset", "write one such as 2026-03-02T06:00:00Z") from None
    return value


Instant = Annotated[str, AfterValidator(_instant)]


class Origin(Section):
    """Where a baseline came from: for people, and for whoever must repeat it."""

    recordings: list[Recording] = Field(
        [], min_length=1, description="a list such as [{name: week-9.jsonl.gz, sha256: …}]"
    )
    first: Instant | None = Field(None, description="the time of the first reading used")
    last: Instant | None = Field(None, description="the time of the last reading used")
    counts: Counts = Field(default=Counts(), description="{readings: …, subgroups: …}")
    choices: dict[Line, Scalar] = Field(
        {}, description="a mapping of what was chosen, such as {sigma: pooled}"
    )
    note: Line | None = Field(None, description="a sentence on where the values came from")

    @model_validator(mode="after")
    def _says_something(self) -> Origin:
        if not self.model_fields_set:
            raise fault("says nothing", "write recordings:, or note: with a sentence")
        return self


def _version(value: int) -> int:
    if value != 1:
        raise fault("is no version of a baseline file", "write version: 1")
    return value


class BaselineFile(Values):
    """A baseline in a file of its own."""

    version: Annotated[Whole, AfterValidator(_version)] = Field(description="version: 1")
    characteristic: Name = Field(description="the name of the characteristic it is for")
    unit: Annotated[str, Field(pattern=LINE)] | None = Field(
        None, description="the unit of its values, such as g"
    )
    origin: Origin = Field(
        description="where the values came from, such as {note: Set by hand after the overhaul.}"
    )


class _Elsewhere(Section):
    file: BaselineFile | None = Field(
        None, description="the path of a baseline file, such as baselines/net-weight.yaml"
    )


class _Learned(Section):
    learn: Whole | None = Field(
        None,
        ge=LEAST,
        le=10_000,
        description=f"how many subgroups to learn from, {LEAST} to 10000, such as 1000",
    )
    over_at_least: Duration = Field(
        SHIFT, description="how long to learn at least, such as 8h", validate_default=False
    )
    adopt: Flag = Field(False, description="true or false")

    @field_validator("over_at_least", "adopt")
    @classmethod
    def _of_learning(cls, value: object, info: ValidationInfo) -> object:
        if info.data.get("learn", 0) is None:
            raise fault("has no learn beside it", "write learn: too, such as learn: 1000")
        return value


class Baseline(Values, _Elsewhere, _Learned):  # fields of the last base are checked first
    """A baseline, the file that holds it, or how it is to be learned."""

    @field_validator("by_stream", "mean", "sigma", "sigma_between")
    @classmethod
    def _not_twice(cls, value: object, info: ValidationInfo) -> object:
        if value not in (None, {}) and info.data.get("file", True) is not None:
            raise fault("stands beside file, which holds all of it", "keep one of the two")
        return value

    @property
    def given(self) -> Values:
        """The values, wherever they stand."""
        return self.file or self
