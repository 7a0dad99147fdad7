"""What leaves for the broker after a commit: alerts, points, standings, health, set-aside notices.

Knows topics and when each is due. Must not know sockets, the journal or how anything was decided.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

import structlog

from monitor import health, messages, times
from monitor.engine import Engine
from monitor.explaining import evidence
from monitor.health import EVERY, Health, SetAsideNotices
from monitor.journal import AlertRow
from monitor.messages import SCHEMA, BaselineMessage, PointMessage, RowField
from monitor.outbox import Outbox
from monitor.outputs import Alert, Gone, Output, Points, SetAside
from monitor.stream import StreamState
from monitor.throttle import Throttle

log = structlog.get_logger()

_IN_FLIGHT = 1_000
_MOST_WAITING = 10_000
"""A broker that has so much to take over gets no points and standings until it has.

Far from 65,535 packet identifiers: one that comes round while it is in use would name two alerts.
"""


class Link(Protocol):
    """What is needed of a connection."""

    @property
    def accepted(self) -> bool:
        """Whether the broker has agreed to talk to us."""

    @property
    def waiting(self) -> int:
        """Publications that the broker has not taken over yet."""

    def publish(self, topic: str, payload: bytes, *, retain: bool = False) -> int:
        """Queue a message; returns its packet identifier."""


class Publisher:
    """Says on the broker what is due, under one root."""

    def __init__(self, root: str, engine: Engine, condition: Health, outbox: Outbox) -> None:
        self._root = root
        self._engine = engine
        self._health = condition
        self._outbox = outbox
        self._notices = SetAsideNotices()
        self._standings: Throttle[StreamState] = Throttle(EVERY)
        self._proposals: dict[StreamState, BaselineMessage | None] = {}
        """The baselines proposed so far; none of a stream that is not in it."""

    def will(self, now: int) -> tuple[str, bytes]:
        """(topic, payload) of what the broker says when we are gone without a word."""
        return f"{self._root}/health", messages.encode(health.will(now))

    def alert(self, output: Alert, entry: int) -> AlertRow:
        """What is to be durable of an alert before it is sent; ``entry`` of the batch caused it."""
        path = messages.path(output.characteristic.name, output.stream)
        return AlertRow(
            f"{self._root}/alert/{path}",
            output.event["id"],
            messages.encode(output.event),
            evidence.encode(output),
            entry,
        )

    def clears(self, output: Gone) -> tuple[str, ...]:
        """The topics whose retained messages are to go with a stream."""
        path = messages.path(output.characteristic, output.stream)
        kinds = ("standing", "baseline") if output.proposed else ("standing",)
        return tuple(f"{self._root}/{kind}/{path}" for kind in kinds)

    def publish(self, link: Link, outputs: Sequence[Output], now: int) -> None:
        """Publish what the outbox holds, and what outputs and the passing of time make due."""
        if not link.accepted:
            return
        for alert in self._outbox.to_send(_IN_FLIGHT):
            if alert.payload:
                stamped = messages.published(alert.payload, times.format_time(now))
                self._outbox.sent(link.publish(alert.topic, stamped))
            else:
                self._outbox.sent(link.publish(alert.topic, b"", retain=True))
        for output in outputs:
            if isinstance(output, Points):
                self._point(link, output)
            elif isinstance(output, SetAside) and self._notices.add(output, now):
                self._notice(link, output.reason)
        for reason in self._notices.due(now):
            self._notice(link, reason)
        if link.waiting < _MOST_WAITING:
            self._publish_standings(link, now)
        if self._health.online and self._health.is_due(now):
            self._publish_health(link, now)

    def farewell(self, link: Link, now: int) -> None:
        """Say that we stop."""
        if link.accepted:
            self._health.disconnected(now, "stopped")
            self._publish_health(link, now)

    def _publish_health(self, link: Link, now: int) -> None:
        engine = self._engine
        message = self._health.message(
            now, engine.counts, engine.lag, len(self._outbox), engine.sessions_lost
        )
        link.publish(f"{self._root}/health", messages.encode(message), retain=True)

    def _publish_standings(self, link: Link, now: int) -> None:
        engine, throttle = self._engine, self._standings
        due = dict.fromkeys(throttle.due(now))
        for state in engine.touched:
            if throttle.touch(state, engine.mark(state), now):
                due[state] = None
        engine.touched.clear()
        for state in due:
            if state.has_left:
                self._proposals.pop(state, None)
                continue  # what is kept of it is cleared, and is to stay so
            path = messages.path(state.plan.name, state.stream)
            link.publish(
                f"{self._root}/standing/{path}",
                messages.encode(engine.standing(state)),
                retain=True,
            )
            proposal = state.learning.proposal
            if proposal is not self._proposals.get(state):
                self._proposals[state] = proposal
                if proposal is not None:
                    log.info(
                        "baseline proposed",
                        stream=path,
                        verdict=proposal["verdict"],
                        adopted=proposal["adopted"],
                        why=proposal["reasons"][0]["found"] if proposal["reasons"] else None,
                    )
                said = b"" if proposal is None else messages.encode(proposal)
                link.publish(f"{self._root}/baseline/{path}", said, retain=True)

    def _notice(self, link: Link, reason: str) -> None:
        message = self._notices.message(reason, self._engine.counts)
        link.publish(f"{self._root}/setaside", messages.encode(message))

    def _point(self, link: Link, point: Points) -> None:
        if link.waiting >= _MOST_WAITING:
            self._health.dropped_points += 1
            return
        plan, subgroup = point.characteristic, point.subgroup
        message = PointMessage(
            schema=SCHEMA,
            characteristic=plan.name,
            stream=dict(point.stream),
            time=times.format_time(subgroup.last),
            number=subgroup.number,
            size=subgroup.size,
            mean=subgroup.mean,
            range=subgroup.range,
            sd=subgroup.sd,
            unit=plan.unit,
            rows=[
                RowField(
                    detector=row.detector,
                    chart=row.chart,
                    statistic=row.statistic,
                    value=row.value,
                    centre=row.centre,
                    lower=row.lower,
                    upper=row.upper,
                    rules=row.rules,
                )
                for row in point.rows
            ],
        )
        topic = f"{self._root}/point/{messages.path(plan.name, point.stream)}"
        link.publish(topic, messages.encode(message))
