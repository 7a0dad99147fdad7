"""The keys of a promise and of the crew's budget: how often may it ring with nothing wrong?

Knows what people can judge. Must not know detectors, or how a promise is kept.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field

from monitor import times
from monitor.configuration.sections.base import Section, fault
from monitor.configuration.sections.scalars import Duration, Positive


def _some_time(value: int) -> int:
    if value == 0:
        raise fault("is no time at all", "write a longer one, such as 14d")
    return value


_Time = Annotated[Duration, AfterValidator(_some_time)]


class Promise(Section):
    """The running time from one false alarm of a characteristic to the next, of all its streams
    and detectors together."""

    false_alarm_every: _Time = Field(
        description="the time from one false alarm to the next that was agreed, such as 14d"
    )


class Budget(Section):
    """The false alarms that the crew will accept, of everything together."""

    alerts: Positive = Field(description="how many false alarms the crew will accept, such as 2")
    per: _Time = Field(8 * 3_600 * times.SECOND, description="in how long, such as 8h")
