"""The keys of a subgroup: how readings of one stream are gathered.

Knows which of them go together. Must not know charts.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field, ValidationInfo, field_validator

from monitor import times
from monitor.configuration.sections.base import Section, fault
from monitor.configuration.sections.scalars import Duration, Whole

_LARGEST = 10_000  # readings


def _some_time(value: int) -> int:
    if value == 0:
        raise fault("is no time at all", "write a longer one, such as 30s, or leave the key out")
    return value


def _window(value: int) -> int:
    # A gauge's times are often whole milliseconds, and all readings of a window are kept until it
    # closes.
    if not times.SECOND // 1_000 <= value <= times.DAY:
        raise fault("is not from 1ms to 1d", "write such a time, for example 60s")
    return value


class Subgroup(Section):
    """So many consecutive readings, or what falls into a window of time."""

    window: Annotated[Duration, AfterValidator(_window)] | None = Field(
        default=None, description="how long the readings of a subgroup are gathered, such as 60s"
    )
    min_size: Whole = Field(
        default=1,
        ge=1,
        le=_LARGEST,
        description="how many readings a window needs, from 1 to 10000",
    )
    size: Whole = Field(
        default=1, ge=1, le=_LARGEST, description="how many readings, from 1 to 10000"
    )
    every: Annotated[Duration, AfterValidator(_some_time)] | None = Field(
        default=None,
        description="the time from the start of one subgroup to the next, such as 30min",
    )
    max_gap: Annotated[Duration, AfterValidator(_some_time)] | None = Field(
        default=None,
        description="the longest time between two readings of one subgroup, such as 30s",
    )

    @field_validator("min_size")
    @classmethod
    def _of_a_window(cls, value: int, info: ValidationInfo) -> int:
        if info.data.get("window", 0) is None:
            raise fault("has no window beside it", "write window: too, or size: for a fixed number")
        return value

    @field_validator("size", "every", "max_gap")
    @classmethod
    def _without_a_window(cls, value: int, info: ValidationInfo) -> int:
        if info.data.get("window") is not None:
            raise fault(
                "stands beside window, which gathers by time alone",
                "keep window and min_size, or size, every and max_gap",
            )
        return value

    @property
    def least(self) -> int:
        """The fewest readings that are judged together."""
        return self.size if self.window is None else self.min_size

    @property
    def single(self) -> bool:
        """Whether every reading is judged by itself."""
        return self.window is None and self.size == 1
