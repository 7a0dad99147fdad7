"""The usual reading of a topic, in one go: what nearly every message is, and nothing else.

Knows what the engine does with a plain, plausible reading that is next in its stream. Must not
decide anything: whatever is not surely that, it leaves to the engine, untouched. It exists for
speed alone; folding with it and without gives equal outputs.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from datetime import datetime
from typing import Any

from monitor import times
from monitor.decode import FUTURE
from monitor.outputs import Output
from monitor.plan import ByCount
from monitor.routes import Quick, Route
from monitor.seen import UNSETTLED
from monitor.stream import Counts, StreamState
from monitor.subgroups import Subgroup

NOTHING: Sequence[Output] = ()

_EPOCH, _MICROSECOND = times.EPOCH, times.MICROSECOND
_from_iso = datetime.fromisoformat


def quick(
    route: Route,
    counts: Counts,
    changed: dict[StreamState, None],
    judge: Callable[[Route, StreamState, Subgroup, int], Sequence[Output]],
) -> Quick | None:
    """A reader of the usual on one route, or None where the source has something unusual to it.

    ``judge`` is called with the route, the stream, the subgroup that ended, and the arrival.
    """
    plan = route.characteristic.plan
    source, subgroup, counter = plan.source, plan.subgroup, route.counter
    stream = source.stream
    if (
        not isinstance(subgroup, ByCount)
        or subgroup.every is not None
        or source.time is None
        or source.sequence is None
        or counter is None
        or len(stream) > 1
        or len(source.use_if) > 1
        or any(len(pointer) != 1 for pointer, _ in source.use_if)
        or any(len(p) != 1 for p in (source.value, source.time, source.sequence.pointer))
        or any(len(pointer) != 1 for _, pointer in stream)
    ):
        return None
    (value_name,), (at_name,), (number_name,) = source.value, source.time, source.sequence.pointer
    key_name = stream[0][1][0] if stream else None
    use_name, allowed = (source.use_if[0][0][0], source.use_if[0][1]) if source.use_if else ("", ())
    used = frozenset(each for each in allowed if type(each) is str)
    lower, upper = source.plausible_lower, source.plausible_upper
    last_but_one, gap = subgroup.size - 1, subgroup.max_gap or 2**62
    known = route.known

    def read(document: Any, arrival: int) -> Sequence[Output] | None:
        try:
            value, number = document[value_name], document[number_name]
            key = () if key_name is None else document[key_name]
            if used and document[use_name] not in used:
                return None
            state = known.get(key)
            at = document[at_name]
            if type(at) is str:
                moment = (_from_iso(at) - _EPOCH) // _MICROSECOND
            elif (type(at) is float or type(at) is int) and -1e11 < at < 1e11:
                moment = round(at * times.SECOND)
            else:
                return None
        except (KeyError, TypeError, ValueError):
            return None
        if (
            state is None
            or type(value) is not float
            or not lower <= value <= upper
            or type(number) is not int
            or type(key) is bool  # found under 1, which it is not in JSON
            or moment > arrival + FUTURE
        ):
            return None
        seen = state.seen
        last = seen.last
        gatherer: Any = state.gatherer  # a CountGatherer, since the plan is ByCount
        if (
            last is None
            or not 0 < number - last <= seen.near
            or moment <= seen.mark
            or moment < seen.closed
            or len(seen.ahead_of) >= UNSETTLED - 1
        ):
            return None
        seen.mark, seen.last = moment, number
        seen.ahead_of.append(last)
        counts.messages += 1
        counts.readings += 1
        counts.lag = arrival - moment
        changed[state] = None
        if counter.last == number - 1 and not counter.noted:
            counter.last = number
        else:
            counts.missing += counter.advance(number, False)
        values = gatherer.values
        # In the middle of a subgroup there is nothing to it; its first and last take care.
        before = gatherer.last
        if 0 < len(values) < last_but_one and before is not None and moment - before <= gap:
            values.append(value)
            gatherer.last = moment
            return NOTHING
        ended = gatherer.add(value, moment, (number, moment, None, None))
        return NOTHING if ended is None else judge(route, state, ended, arrival)

    return read
