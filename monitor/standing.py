"""How a stream stands: what is open, whether it is judged, its last subgroup.

Knows the fields of a standing. Must not know when one is published.
"""

from __future__ import annotations

from monitor import times
from monitor.events import subgroup_field
from monitor.messages import SCHEMA, StandingMessage
from monitor.stream import StreamState


def standing(state: StreamState, now: int, since: int, blind: str | None) -> StandingMessage:
    """The standing of a stream at arrival ``now``, as it is since ``since``.

    ``blind``: why no stream is judged right now, or None.
    """
    why = blind or (_unjudged(state) if state.judgement is None else None)
    return StandingMessage(
        schema=SCHEMA,
        characteristic=state.plan.name,
        title=state.plan.title,
        stream=dict(state.stream),
        time=times.format_time(now),
        judging={"judging": why is None, "since": times.format_time(since), "why": why},
        open=[] if state.alerts is None else state.alerts.open(),
        subgroup=None if state.last is None else subgroup_field(state.last),
    )


def _unjudged(state: StreamState) -> str:
    return state.learning.told or "no baseline"
