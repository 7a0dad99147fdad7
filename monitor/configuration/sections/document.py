"""The whole configuration, and the keys of the contract that are still to come.

Knows the top level. Must not know what the sections hold.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field

from monitor.configuration.sections.base import Section, fault
from monitor.configuration.sections.characteristic import Characteristic
from monitor.configuration.sections.daemon import Alerts, Broker, Journal, Outputs
from monitor.configuration.sections.promise import Budget
from monitor.configuration.sections.scalars import Name, Whole


def _known_version(value: int) -> int:
    if value != 1:
        raise fault("is no version of this configuration", "write version: 1")
    return value


class Measured(Section):
    """What is measured and how it is judged: all that a replay needs."""

    version: Annotated[Whole, AfterValidator(_known_version)] = Field(description="version: 1")
    alerts: Alerts = Field(Alerts(), description="{off_delay: 2min, rejoin: 30min}")
    budget: Budget | None = Field(
        None, description="false alarms that the crew will accept: {alerts: 2, per: 8h}"
    )
    characteristics: dict[Name, Characteristic] = Field(
        min_length=1, description="a mapping of names to what is measured"
    )


class Document(Measured):
    """The whole configuration."""

    broker: Broker = Field(description="how to reach the broker, such as {host: localhost}")
    outputs: Outputs = Field(
        description="where messages go, such as {root: plant/jar-line-2/monitor}"
    )
    journal: Journal = Field(description="where to keep the journal: {path: var/jar-line-2.db}")


DAEMON = frozenset(Document.model_fields) - frozenset(Measured.model_fields)
"""Keys that only the daemon needs."""

NOT_BUILT_KEYS: dict[type[Section], frozenset[str]] = {
    Measured: frozenset({"instances"}),
    Characteristic: frozenset({"gauge", "changeover"}),
}
"""Keys of the contract that are still to come; delete one here when its field is added."""

NOT_BUILT_VALUES: dict[str, frozenset[str]] = {
    "chart": frozenset({"fraction", "number", "count", "rate"}),
}
"""Values of the contract that are still to come, by key."""
