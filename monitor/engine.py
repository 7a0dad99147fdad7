"""The fold: journal entries in, outputs out.

Knows how the steps are wired: decode, seen, subgroups, detectors, alerts. Must not know a clock, a
file, a socket or who calls it: the daemon and the replay are two shells around this object.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict
from typing import Any

from monitor import numbers, times
from monitor.deadlines import Deadlines
from monitor.decode import MAX_PAYLOAD, judge_sequence, judge_time
from monitor.entries import (
    Configured,
    Connected,
    Disconnected,
    Entry,
    Message,
    Parsed,
    Reading,
    Started,
    Tick,
)
from monitor.messages import AlertEvent, StandingMessage
from monitor.outputs import Alert, Evidence, Output, SetAside
from monitor.plan import Plan
from monitor.quick import quick
from monitor.routes import Characteristic, Route, Routes
from monitor.seen import Verdict
from monitor.standing import standing
from monitor.stream import Counts, StreamState
from monitor.subgroups import Subgroup

STATE_VERSION = 2

_NOTHING: Sequence[Output] = ()
_GRACE = times.SECOND


def _unnoticed(_: StreamState) -> None:
    """Nobody asked."""


class Engine:
    """Folds entries, in order, into outputs.

    ``points`` asks for ``Points`` outputs, with a row for each statistic of each detector.
    ``opened`` is told of each stream that is first heard of, before it takes its reading. Equal
    plans and equal entries give equal outputs, always.
    """

    def __init__(
        self,
        plan: Plan,
        *,
        points: bool,
        opened: Callable[[StreamState], None] = _unnoticed,
    ) -> None:
        self.counts = Counts()
        self.touched: dict[StreamState, None] = {}
        """Streams whose standing changed since the caller last cleared it, in order."""
        self.changed: dict[StreamState, None] = {}
        """Streams that remember something else since the caller last cleared it."""
        self.plan = plan
        self.sessions_lost = 0
        self._points = points
        self._opened = opened
        self._characteristics = {c.name: Characteristic(c) for c in plan.characteristics}
        self._routes = Routes(self._characteristics.values())
        self._deadlines = Deadlines()
        self._arrival = 0
        self._heard = 0
        self._blind: tuple[int, str] | None = None
        self._watching_since = 0
        self._had_session = False

    def fold(self, entry: Entry) -> Sequence[Output]:
        """Take one entry; what it caused, in order."""
        time = entry.time
        if time > self._arrival:
            self._arrival = time
        if type(entry) is Parsed and not self._deadlines.heap:
            # What nearly every entry of a recording is.
            self._heard = self._arrival
            return self._document(entry.topic, entry.document, None, time)
        if isinstance(entry, Tick):
            return self._close_due()
        if isinstance(entry, Started | Disconnected):
            self._blinded(entry)
            return _NOTHING
        self._heard = self._arrival
        due = self._close_due() if self._deadlines.heap else _NOTHING
        outputs = _NOTHING
        if isinstance(entry, Parsed):
            outputs = self._document(entry.topic, entry.document, None, time)
        elif isinstance(entry, Message):
            outputs = self._message(entry, time)
        elif isinstance(entry, Reading):
            outputs = self._row(entry, time)
        elif isinstance(entry, Connected):
            outputs = self._watch(entry.session_present)
        elif isinstance(entry, Configured):
            outputs = self._configure(entry.plan)
        return (*due, *outputs) if due else outputs

    @property
    def lag(self) -> int | None:
        """Microseconds from the latest reading's own time to its arrival."""
        return self.counts.lag

    def next_deadline(self) -> int | None:
        """The arrival at which a ``Tick`` is due unless another entry comes first."""
        return self._deadlines.next()

    def streams(self) -> list[StreamState]:
        """Every stream that has had a reading."""
        return [s for c in self._characteristics.values() for s in c.streams.values()]

    def mark(self, state: StreamState) -> object:
        """What of a standing deserves to be said at once when it differs."""
        return state.sequence.value, self._blind, state.judgement

    def standing(self, state: StreamState) -> StandingMessage:
        """How a stream stands now."""
        if self._blind is not None:
            since, why = self._blind
            return standing(state, self._arrival, since, why)
        return standing(state, self._arrival, max(state.since, self._watching_since), None)

    def state(self) -> dict[str, Any]:
        """All that is remembered beside the streams, as JSON values."""
        return {
            "version": STATE_VERSION,
            "arrival": self._arrival,
            "heard": self._heard,
            "blind": self._blind,
            "watching_since": self._watching_since,
            "counts": asdict(self.counts),
            "deadlines": self._deadlines.state(),
            "counters": self._routes.state(),
            "had_session": self._had_session,
            "sessions_lost": self.sessions_lost,
            "gauges": {c.plan.name: c.gauge.state() for c in self._characteristics.values()},
        }

    def restore(self, state: dict[str, Any], streams: Iterable[dict[str, Any]]) -> None:
        """Take back what ``state`` gave, and what each stream's gave, under an equal plan.

        ValueError where they were given by another version.
        """
        if state.get("version") != STATE_VERSION:
            raise ValueError(f"state of version {state.get('version')}, not {STATE_VERSION}")
        self._arrival, self._heard = state["arrival"], state["heard"]
        self._blind = None if state["blind"] is None else tuple(state["blind"])
        self._watching_since = state["watching_since"]
        self.counts = Counts(**state["counts"])
        self._deadlines.restore(state["deadlines"])
        self._routes.restore(state["counters"])
        self._had_session, self.sessions_lost = state["had_session"], state["sessions_lost"]
        for each in streams:
            characteristic = self._characteristics[each["characteristic"]]
            keys = tuple(each["stream"][key] for key in characteristic.decoder.keys)
            characteristic.open(keys, each["since"], self.counts).restore(each)
        # After the streams: what they count together is newest here.
        for name, remembered in state["gauges"].items():
            self._characteristics[name].gauge.restore(remembered)

    # Time

    def _watch(self, session_present: bool) -> list[Output]:
        self._deadlines.resume(self._arrival)
        self._blind = None
        self._watching_since = self._arrival
        self._touch_all()
        lost, self._had_session = self._had_session and not session_present, True
        if not lost:
            return []
        self.sessions_lost += 1
        return [
            self._told(c, event)
            for c in self._characteristics.values()
            for event in c.gauge.met("session-lost", self._arrival)
        ]

    def _told(self, characteristic: Characteristic, event: AlertEvent) -> Alert:
        self.counts.alerts += 1
        return Alert(characteristic.plan, (), event, Evidence((), ()))

    def _configure(self, plan: Plan) -> list[Output]:
        """Another plan is in force: streams that go on being judged alike go on."""
        if plan == self.plan:
            return []
        self.plan = plan
        time, counts = self._arrival, self.counts
        before, self._characteristics = self._characteristics, {}
        outputs: list[Output] = []
        for each in plan.characteristics:
            old, new = before.pop(each.name, None), Characteristic(each)
            if old is not None:
                new.adopt(old)
                for _, state in sorted(new.streams.items()):
                    outputs += state.reconfigure(each, time, counts)
                    if state.gatherer.closes() is None:
                        self._deadlines.cancel((each.name, state.keys))
                outputs += self._leave(old)
            self._characteristics[each.name] = new
        for old in before.values():
            outputs += self._leave(old)
            outputs += [self._told(old, event) for event in old.gauge.withdraw(time)]
        self._routes = Routes(self._characteristics.values(), self._routes)
        self._touch_all()
        self.changed.update(self.touched)
        return outputs

    def _leave(self, old: Characteristic) -> list[Output]:
        """The streams that no other plan took over are no more."""
        outputs: list[Output] = []
        # In one order, whichever was heard of first: a restored engine does not know.
        for _, state in sorted(old.streams.items()):
            outputs += state.leave(self._arrival, self.counts)
            self._deadlines.cancel((old.plan.name, state.keys))
            self.touched.pop(state, None)
            self.changed.pop(state, None)
        return outputs

    def _blinded(self, entry: Started | Disconnected) -> None:
        starting = isinstance(entry, Started)
        why = "starting" if starting else "disconnected from the broker"
        # From the last we heard, not from a tick: whether one came to pass must change nothing.
        self._deadlines.freeze(self._heard)
        self._blind = (self._arrival, why)
        self._touch_all()

    def _touch_all(self) -> None:
        self.touched.update(dict.fromkeys(self.streams()))

    def _close_due(self) -> Sequence[Output]:
        outputs: list[Output] = []
        while (owner := self._deadlines.pop(self._arrival)) is not None:
            name, keys = owner
            state = self._characteristics[name].streams[keys]
            outputs += state.close(self.counts, self._points)
            self.touched[state] = self.changed[state] = None
        return outputs

    # Readings in

    def _message(self, message: Message, arrival: int) -> Sequence[Output]:
        topic, payload = message.topic, message.payload
        if len(payload) > MAX_PAYLOAD or message.retain:
            self.counts.messages += 1
            reason = "retained" if len(payload) <= MAX_PAYLOAD else "oversized"
            return (self._set_aside(reason, None, arrival, topic, payload),)
        return self._document(topic, numbers.parse(payload), payload, arrival)

    def _document(
        self, topic: str, document: object, payload: bytes | None, arrival: int
    ) -> Sequence[Output]:
        """``payload`` is None where it is only the document's own text."""
        routes = self._routes.known.get(topic)
        if routes is None:
            routes = self._routes.find(topic)
            if len(routes) == 1:
                routes[0].quick = quick(routes[0], self.counts, self.changed, self._judge)
        elif len(routes) == 1 and routes[0].quick is not None:
            usual = routes[0].quick(document, arrival)
            if usual is not None:
                return usual
        self.counts.messages += 1
        outputs = _NOTHING
        for route in routes:
            result = self._read(route, document, arrival)
            if isinstance(result, str):
                route.note(document)
                name = route.characteristic.plan.name
                shown = numbers.text(document) if payload is None else payload
                result = (self._set_aside(result, name, arrival, topic, shown),)
            outputs = (*outputs, *result) if outputs else result
        if not routes:
            shown = numbers.text(document) if payload is None else payload
            return (self._set_aside("no-topic", None, arrival, topic, shown),)
        return outputs

    def _row(self, row: Reading, arrival: int) -> Sequence[Output]:
        self.counts.messages += 1
        route = self._routes.tables.get(row.characteristic)
        result = "no-topic" if route is None else self._read(route, row, arrival)
        if not isinstance(result, str):
            return result
        shown = str(row.value).encode(errors="replace")
        return (self._set_aside(result, row.characteristic, arrival, "", shown),)

    def _read(self, route: Route, document: object, arrival: int) -> Sequence[Output] | str:
        """A document's reading on a route; a text is the reason why it was set aside."""
        decoder, counts = route.decoder, self.counts
        if document is numbers.NOT_JSON and not decoder.number:
            return "not-json"
        if decoder.conditional and not decoder.is_used(document):
            return "not-used"
        key, raw, at, number = decoder.find(document)
        state = route.known.get(key)
        keys: tuple[str, ...] = ()
        if state is None:
            values = decoder.stream_values(document, route.levels)
            if values is None or not route.characteristic.may_open(values):
                return "no-stream"
            keys, state = values, route.characteristic.streams.get(values)
        value = decoder.judge_value(raw)
        if isinstance(value, str):
            return value
        timed = decoder.timed
        moment = judge_time(at, arrival) if timed else arrival
        if isinstance(moment, str):
            return moment
        if state is None:
            state = route.characteristic.open(keys, arrival, counts)
            self._opened(state)
        if key is not None:
            route.known[key] = state
        sequence = judge_sequence(number)
        seen = state.seen
        if not timed:
            # To a stream arrival never runs backwards, whatever else came before.
            moment = max(moment, seen.mark)
        verdict = seen.admit(moment, timed, sequence)
        if verdict is Verdict.REPEATED or verdict is Verdict.LATE:
            return str(verdict.value)
        counts.readings += 1
        self.changed[state] = None
        outputs = _NOTHING
        if verdict is Verdict.RESTART:
            outputs = state.gauge_restarted(moment, counts)
            self.touched[state] = None
        if sequence is not None and route.counter is not None:
            counts.missing += route.counter.advance(sequence, verdict is Verdict.RESTART)
        if timed:
            counts.lag = arrival - moment
            subgroup = state.gatherer.add(value, moment, (sequence, moment, None, None))
        elif sequence is not None:
            subgroup = state.gatherer.add(value, moment, (sequence, None, None, None))
        else:
            subgroup = state.gatherer.add(value, moment, (None, None, moment, seen.place))
        if subgroup is not None:
            judged = self._judge(route, state, subgroup, arrival)
            outputs = (*outputs, *judged) if outputs else judged
        elif state.windowed:
            outputs = (*outputs, *self._gauge_ended(route, arrival))
        if state.windowed:
            self._await_close(state, moment)
        return outputs

    def _judge(
        self, route: Route, state: StreamState, subgroup: Subgroup, arrival: int
    ) -> Sequence[Output]:
        self.touched[state] = None
        judged = state.judge(subgroup, self.counts, self._points)
        ended = self._gauge_ended(route, arrival)
        return (*judged, *ended) if ended else judged

    def _gauge_ended(self, route: Route, arrival: int) -> Sequence[Output]:
        # Windows close by themselves, mostly: there a reading is all that tells.
        characteristic = route.characteristic
        if not characteristic.gauge.is_open:
            return _NOTHING
        ended = characteristic.gauge.ended(arrival)
        return [self._told(characteristic, each) for each in ended]

    def _await_close(self, state: StreamState, moment: int) -> None:
        closes = state.gatherer.closes()
        if closes is not None:
            # The gauge's clock need not be ours: what is left of the window by its clock, and a
            # moment for what is still on its way.
            left = closes - moment + _GRACE
            owner = (state.plan.name, state.keys)
            self._deadlines.set(owner, self._deadlines.watched(self._arrival) + left)

    def _set_aside(
        self, reason: str, characteristic: str | None, time: int, topic: str, payload: bytes
    ) -> SetAside:
        counts = self.counts.set_aside
        counts[reason] = counts.get(reason, 0) + 1
        return SetAside(reason, characteristic, time, topic, payload)
