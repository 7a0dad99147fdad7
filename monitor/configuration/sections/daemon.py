"""The keys of the daemon: broker, outputs, journal, alerts.

Knows what each may hold. Must not know characteristics.
"""

from __future__ import annotations

import re
from typing import Annotated, Literal

from pydantic import AfterValidator, Field, ValidationInfo, field_validator

from monitor import times
from monitor.configuration.sections.base import Section, fault
from monitor.configuration.sections.scalars import Duration, Flag, Line, Size, Whole


def _root(value: str) -> str:
    if value.startswith(("/", "$")) or value.endswith("/"):
        raise fault(
            "begins or ends with / or begins with $", "write it as plant/jar-line-2/monitor"
        )
    if set("+#{}") & set(value):
        raise fault("holds a wildcard", "write one plain topic, such as plant/jar-line-2/monitor")
    return value


def _host(value: str) -> str:
    if "/" in value or " " in value or re.fullmatch(r"[^:]*:[0-9]+", value):
        raise fault("is more than a name or address", "write host: localhost and port: 1883 apart")
    return value


def _whole_seconds(value: int) -> int:
    if value % times.SECOND or not 0 < value <= 65_535 * times.SECOND:
        raise fault("is not a whole number of seconds from 1s to 65535s", "write 30s")
    return value


def _expiry(value: int) -> int:
    if value % times.SECOND or value < times.SECOND:
        raise fault("is not a whole number of seconds from 1s up", "write 7d")
    return value


class Tls(Section):
    """Files for a connection that nobody can listen in on, in PEM."""

    ca: Line = Field(description="the path of the certificate authority's file, such as ca.pem")
    certificate: Line | None = Field(
        None, description="the path of our own certificate's file, such as monitor.pem"
    )
    key: Line | None = Field(
        None, description="the path of the file that holds our certificate's key"
    )

    @field_validator("key")
    @classmethod
    def _has_a_certificate(cls, value: str | None, info: ValidationInfo) -> str | None:
        if value is not None and info.data.get("certificate", "") is None:
            raise fault("has no certificate beside it", "write certificate: too")
        return value


class Broker(Section):
    """How to reach the broker."""

    host: Annotated[Line, AfterValidator(_host)] = Field(
        description="the broker's name or address, such as localhost"
    )
    port: Whole | None = Field(
        None, ge=1, le=65_535, description="a port from 1 to 65535, such as 1883"
    )
    client_id: Line | None = Field(
        None, description="a name that no other client of the broker has, such as line-2-monitor"
    )
    keepalive: Annotated[Duration, AfterValidator(_whole_seconds)] = Field(
        30 * times.SECOND, description="a duration such as 30s"
    )
    username: Line | None = Field(None, description="the user's name at the broker")
    password_file: Line | None = Field(
        None, description="the path of a file that holds the password and nothing else"
    )
    protocol: Literal["3.1.1", "5"] = Field("3.1.1", description='"3.1.1" or "5", in quotes')
    session_expiry: Annotated[Duration, AfterValidator(_expiry)] = Field(
        7 * times.DAY,
        description="how long the broker keeps messages while we are away, such as 7d",
    )
    tls: Tls | None = Field(None, description="{ca: ca.pem}, with certificate and key where asked")

    @field_validator("password_file")
    @classmethod
    def _has_a_user(cls, value: str | None, info: ValidationInfo) -> str | None:
        if value is not None and info.data.get("username", "") is None:
            raise fault("has no username beside it", "write username: too")
        return value

    @field_validator("session_expiry")
    @classmethod
    def _in_protocol_5(cls, value: int, info: ValidationInfo) -> int:
        if info.data.get("protocol") == "3.1.1":
            raise fault('needs protocol: "5"', 'write protocol: "5", or leave it out')
        return value


class Outputs(Section):
    """Where messages go."""

    root: Annotated[Line, AfterValidator(_root)] = Field(
        max_length=1_000,
        description="the topic that everything is published under, such as plant/line-2/monitor",
    )
    points: Flag = Field(True, description="true or false: whether every subgroup is published")


def _a_day(value: int) -> int:
    if value < times.DAY:
        raise fault("is less than a day", "write a duration from 1d, such as 30d")
    return value


def _roomy(value: int) -> int:
    if value < 50_000_000:
        raise fault("is too small to work with", "write a size from 50MB, such as 20GB")
    return value


class Journal(Section):
    """Where the daemon keeps what it must not lose, and how long."""

    path: Line = Field(description="the path of a file, such as var/jar-line-2.db")
    keep: Annotated[Duration, AfterValidator(_a_day)] = Field(
        30 * times.DAY, description="a duration from 1d, such as 30d"
    )
    max_size: Annotated[Size, AfterValidator(_roomy)] = Field(
        20_000_000_000, description="a size from 50MB, such as 20GB"
    )
    keep_alerts: Annotated[Duration, AfterValidator(_a_day)] = Field(
        3 * 365 * times.DAY, description="a duration from 1d, such as 3y"
    )


class Alerts(Section):
    """How alerts settle."""

    off_delay: Duration = Field(
        default=2 * 60 * times.SECOND, description="the shortest life of an alert, such as 2min"
    )
    rejoin: Duration = Field(
        default=30 * 60 * times.SECOND,
        description="how soon after its return an alert goes on under the same id, such as 30min",
    )
