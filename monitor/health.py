"""What the daemon says of itself, in health and in set-aside notices.

Knows counts, errors and when they are worth saying. Must not know sockets, files or a clock.
"""

from __future__ import annotations

from monitor import times
from monitor.messages import (
    SCHEMA,
    CountsField,
    ExampleField,
    HealthMessage,
    SetAsideMessage,
)
from monitor.outputs import SetAside
from monitor.stream import Counts
from monitor.throttle import Throttle

EVERY = 10 * times.SECOND
"""How often health is said; set-aside notices of one reason and standings not more often."""

NEXT_BY = 3 * EVERY
_EXAMPLE = 200


class Health:
    """The daemon's own condition."""

    def __init__(self) -> None:
        self.online = False
        self.since: int | None = None
        self.last_error: str | None = None
        self.frozen: str | None = None
        """Why nothing can be acknowledged."""
        self.unsafe = 0
        self.dropped_points = 0
        self._due = 0
        self._said_frozen = False

    def connected(self, now: int) -> None:
        """Subscribed: readings reach us."""
        self.online, self.since, self._due = True, now, now

    def disconnected(self, now: int, why: str) -> None:
        """Readings do not reach us."""
        self.online, self.since, self.last_error = False, now, why

    def is_due(self, now: int) -> bool:
        """Whether it is time to say how we are: in turn, or since that has changed."""
        return now >= self._due or self._said_frozen is (self.frozen is None)

    def message(
        self, now: int, counts: Counts, lag: int | None, waiting: int, sessions_lost: int
    ) -> HealthMessage:
        """How we are now; the next is due ``EVERY`` later."""
        self._due = now + EVERY
        self._said_frozen = self.frozen is not None
        return HealthMessage(
            schema=SCHEMA,
            online=self.online,
            time=times.format_time(now),
            next_by=times.format_time(now + NEXT_BY) if self.online else None,
            since=None if self.since is None else times.format_time(self.since),
            counts=CountsField(
                messages=counts.messages,
                readings=counts.readings,
                set_aside=dict(counts.set_aside),
                subgroups=counts.subgroups,
                abandoned=counts.abandoned,
                missing=counts.missing,
                alerts=counts.alerts,
            ),
            lag=None if lag is None else lag / times.SECOND,
            waiting=waiting,
            last_error=self.frozen or self.last_error,
            qos_0=self.unsafe,
            sessions_lost=sessions_lost,
            points_dropped=self.dropped_points,
        )


def will(now: int) -> HealthMessage:
    """What the broker says for us when we are gone without a word."""
    return HealthMessage(
        schema=SCHEMA,
        online=False,
        time=times.format_time(now),
        next_by=None,
        since=None,
        counts=None,
        lag=None,
        waiting=None,
        last_error="the connection to the broker ended without a word",
        qos_0=None,
        sessions_lost=None,
        points_dropped=None,
    )


class SetAsideNotices:
    """Per reason: the count and one example; the first at once, then at most once in ``EVERY``."""

    def __init__(self) -> None:
        self._throttle: Throttle[str] = Throttle(EVERY)
        self._latest: dict[str, SetAside] = {}

    def add(self, output: SetAside, now: int) -> bool:
        """True where the reason should be said now."""
        self._latest[output.reason] = output
        return self._throttle.touch(output.reason, None, now)

    def due(self, now: int) -> list[str]:
        """Reasons whose time has come."""
        return self._throttle.due(now)

    def message(self, reason: str, counts: Counts) -> SetAsideMessage:
        """The notice for a reason that was added before."""
        latest = self._latest[reason]
        return SetAsideMessage(
            schema=SCHEMA,
            reason=reason,
            count=counts.set_aside[reason],
            example=ExampleField(
                characteristic=latest.characteristic,
                topic=latest.topic,
                payload=latest.payload[: 4 * _EXAMPLE].decode(errors="replace")[:_EXAMPLE],
                time=times.format_time(latest.time),
            ),
        )
