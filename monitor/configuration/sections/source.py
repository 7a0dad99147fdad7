"""The keys of a source: how messages become readings of streams.

Knows topics, pointers and stream keys. Must not know what the readings mean.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import (
    AfterValidator,
    BeforeValidator,
    Field,
    ValidationInfo,
    field_validator,
    model_validator,
)

from monitor import filters
from monitor.configuration.sections.base import Section, fault
from monitor.configuration.sections.scalars import Number, Pointer, Rate, Scalar, StreamKey, Whole

RESERVED = frozenset({"characteristic", "value", "time", "sequence"})
"""Columns of a table of readings, so no stream key can be called so."""


def _filter(value: str) -> str:
    example = "write a topic filter, such as plant/jar-line-2/checkweigher/{lane}/reading"
    try:
        named = filters.parse(value)
    except ValueError as error:
        raise fault(str(error), example) from None
    _not_reserved([key for _, key in named.captures])
    return value


def _not_reserved(keys: list[str]) -> None:
    if taken := RESERVED.intersection(keys):
        raise fault(
            f"calls a stream key {min(taken)}, as a column of every table of readings",
            "give it another name, such as head",
        )


class Sequence(Section):
    """Where the counter stands, and where it starts again."""

    value: Pointer = Field(description="the counter's place in the payload, such as /n")
    wraps: Whole | None = Field(
        None, ge=2, description="how many numbers the counter has before it is 0 again: 65536"
    )


class Plausible(Section):
    """What the gauge can show at all; readings outside are set aside."""

    lower: Number | None = Field(None, description="the smallest value the gauge can show")
    upper: Number | None = Field(None, description="the largest value the gauge can show")

    @field_validator("upper")
    @classmethod
    def _above_lower(cls, value: float | None, info: ValidationInfo) -> float | None:
        lower = info.data.get("lower")
        if value is not None and lower is not None and value <= lower:
            raise fault("is not above lower", "write lower and upper in their order")
        return value


def _spread_sequence(value: object) -> object:
    return value if isinstance(value, dict) else {"value": value}


def _spread_values(value: object) -> object:
    if not isinstance(value, dict):
        return value
    return {key: each if isinstance(each, list) else [each] for key, each in value.items()}


_USE_IF = "values to compare with, such as {/verdict: [accept, reject]}"


class Source(Section):
    """How messages become readings."""

    topic: Annotated[str, AfterValidator(_filter)] = Field(
        description="a topic filter, such as plant/jar-line-2/checkweigher/{lane}/reading"
    )
    payload: Literal["json", "number"] = Field(description="json or number")
    value: Pointer | None = Field(
        None, validate_default=True, description="the reading's place in the payload, such as /net"
    )
    time: Pointer | None = Field(
        None, description="the place of the time in the payload, such as /t"
    )
    sequence: Annotated[Sequence | None, BeforeValidator(_spread_sequence)] = Field(
        None, description="the counter's place in the payload, such as /n"
    )
    stream: dict[StreamKey, Pointer] = Field(
        {}, description="a mapping of names to places in the payload, such as {head: /head}"
    )
    use_if: Annotated[
        dict[Pointer, Annotated[list[Scalar], Field(min_length=1, description=_USE_IF)]],
        BeforeValidator(_spread_values),
    ] = Field({}, description=_USE_IF)
    plausible: Plausible | None = Field(
        None, description="what the gauge can show, such as {lower: 0, upper: 1000}"
    )
    expected_rate: Rate | None = Field(
        None, description="readings of all streams together, such as 600/min"
    )
    expected_streams: Whole | None = Field(
        None, ge=1, le=10_000, description="how many streams there will be, such as 6"
    )

    @field_validator("value", "time", "sequence", "stream", "use_if")
    @classmethod
    def _only_in_json(cls, value: object, info: ValidationInfo) -> object:
        payload = info.data.get("payload")
        if payload == "number" and value not in (None, {}):
            raise fault("needs payload: json", "leave it out, or write payload: json")
        if payload == "json" and value is None and info.field_name == "value":
            raise fault(
                "is missing", "write the reading's place in the payload, such as /net", absent=True
            )
        return value

    @field_validator("stream")
    @classmethod
    def _keys_of_its_own(cls, value: dict[str, str], info: ValidationInfo) -> dict[str, str]:
        _not_reserved(list(value))
        for _, key in filters.parse(info.data["topic"]).captures if "topic" in info.data else ():
            if key in value:
                raise fault("is already a level of the topic", "write it in one place", key)
        return value

    @model_validator(mode="after")
    def _streams_have_keys(self) -> Source:
        if self.expected_streams not in (None, 1) and not self.keys():
            wrong = "is more than one, and nothing tells streams apart"
            instead = "write stream keys: {name} for + in topic, or stream: {head: /head}"
            raise fault(wrong, instead, "expected_streams")
        return self

    def keys(self) -> list[str]:
        """The stream keys: topic levels first, then those of the payload."""
        return [key for _, key in filters.parse(self.topic).captures] + list(self.stream)
