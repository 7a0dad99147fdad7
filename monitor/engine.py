"""The fold: journal entries in, outputs out.

Knows how the steps are wired: decode, seen, subgroups, detectors, alerts. Must not know a clock, a
file, a socket or who calls it: the daemon and the replay are two shells around this object.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

from monitor import filters, numbers, times
from monitor.alerts import StreamAlerts, subgroup_field
from monitor.decode import MAX_PAYLOAD, Decoder, judge_sequence, judge_time
from monitor.detectors import Detector, Signal, detector
from monitor.detectors.charts import standard_error
from monitor.entries import Connected, Disconnected, Entry, Message, Reading, Started
from monitor.lookback import LookBack
from monitor.messages import SCHEMA, StandingMessage
from monitor.outputs import Alert, Output, Points, Row, SetAside, Stream
from monitor.plan import CharacteristicPlan, DetectorPlan, Plan, SequencePlan
from monitor.seen import StreamSeen, TopicCounter, Verdict
from monitor.subgroups import Gatherer, Identity, Subgroup

MAX_STREAMS = 10_000
"""Streams a characteristic may have: a guard against a field that was no stream key."""

_MAX_ROUTES = 20_000


@dataclass(slots=True)
class Counts:
    """What was taken in and given out since the first entry; ``set_aside`` by reason."""

    messages: int = 0
    readings: int = 0
    subgroups: int = 0
    abandoned: int = 0
    missing: int = 0
    signals: int = 0
    alerts: int = 0
    set_aside: dict[str, int] = field(default_factory=dict)


class StreamState:
    """Everything that is remembered of one stream."""

    __slots__ = (
        "alerts",
        "detectors",
        "errors",
        "gatherer",
        "last",
        "lookback",
        "plan",
        "seen",
        "since",
        "stream",
    )

    def __init__(self, plan: CharacteristicPlan, stream: Stream, since: int) -> None:
        sequence = plan.source.sequence
        self.plan = plan
        self.stream = stream
        self.since = since
        self.seen = StreamSeen(sequence.wraps if sequence else None)
        self.gatherer = Gatherer(plan.subgroup)
        self.detectors: list[tuple[DetectorPlan, Detector]] = [
            (each, detector(each, plan.baseline)) for each in plan.detectors
        ]
        self.lookback = LookBack()
        self.alerts = StreamAlerts(plan, stream)
        self.last: Subgroup | None = None
        self.errors: dict[int, float] = {}

    def standardised(self, subgroup: Subgroup) -> float:
        """The subgroup's mean in standard errors from the baseline."""
        error = self.errors.get(subgroup.size)
        if error is None:
            error = self.errors[subgroup.size] = standard_error(self.plan.baseline, subgroup.size)
        return (subgroup.mean - self.plan.baseline.mean) / error


class Characteristic:
    """A characteristic's plan, its decoder and its streams, found by their values in key order."""

    __slots__ = ("decoder", "plan", "streams")

    def __init__(self, plan: CharacteristicPlan) -> None:
        self.plan = plan
        self.decoder = Decoder(plan.source)
        self.streams: dict[tuple[str, ...], StreamState] = {}


class _Route(NamedTuple):
    """What a concrete topic leads to; its streams may share the counter."""

    characteristic: Characteristic
    levels: tuple[str | None, ...]
    counter: TopicCounter | None


class Engine:
    """Folds entries, in order, into outputs.

    ``points`` asks for ``Points`` outputs, with a row for each statistic of each detector. Equal
    plans and equal entries give equal outputs, always.
    """

    def __init__(self, plan: Plan, *, points: bool) -> None:
        self.counts = Counts()
        self.touched: dict[StreamState, None] = {}
        """Streams whose standing changed since the caller last cleared it, in order."""
        self.lag: int | None = None
        """Microseconds from the latest reading's own time to its arrival."""
        self._points = points
        self._characteristics = {c.name: Characteristic(c) for c in plan.characteristics}
        self._routes: dict[str, tuple[_Route, ...]] = {}
        self._arrival = 0
        self._blind: tuple[int, str] | None = None
        self._watching_since = 0

    def fold(self, entry: Entry) -> Sequence[Output]:
        """Take one entry; what it caused, in order."""
        time = entry.time
        if time > self._arrival:
            self._arrival = time
        match entry:
            case Message():
                return self._message(entry, time)
            case Reading():
                return self._row(entry, time)
            case Connected():
                self._watch(time)
            case Disconnected():
                self._blind = (time, "disconnected from the broker")
                self._touch_all()
            case Started():
                self._blind = (time, "starting")
                self._touch_all()
        return ()

    def streams(self) -> list[StreamState]:
        """Every stream that has had a reading."""
        return [s for c in self._characteristics.values() for s in c.streams.values()]

    def mark(self, state: StreamState) -> object:
        """What of a standing deserves to be said at once when it differs."""
        return state.alerts.sequence, self._blind

    def standing(self, state: StreamState) -> StandingMessage:
        """How a stream stands now."""
        blind = self._blind
        since = max(state.since, self._watching_since) if blind is None else blind[0]
        return StandingMessage(
            schema=SCHEMA,
            characteristic=state.plan.name,
            title=state.plan.title,
            stream=dict(state.stream),
            time=times.format_time(self._arrival),
            judging={
                "judging": blind is None,
                "since": times.format_time(since),
                "why": None if blind is None else blind[1],
            },
            open=state.alerts.open(),
            subgroup=None if state.last is None else subgroup_field(state.last),
        )

    def _watch(self, time: int) -> None:
        self._blind = None
        self._watching_since = time
        self._touch_all()

    def _touch_all(self) -> None:
        self.touched.update(dict.fromkeys(self.streams()))

    # Readings in

    def _message(self, message: Message, arrival: int) -> Sequence[Output]:
        self.counts.messages += 1
        topic, payload = message.topic, message.payload
        if len(payload) > MAX_PAYLOAD:
            return self._set_aside("oversized", None, arrival, topic, payload)
        if message.retain:
            return self._set_aside("retained", None, arrival, topic, payload)
        routes = self._routes.get(topic)
        if routes is None:
            routes = self._route(topic)
        if not routes:
            return self._set_aside("no-topic", None, arrival, topic, payload)
        outputs: Sequence[Output] = ()
        for route in routes:
            number = route.characteristic.decoder.number
            document = numbers.parse_plain(payload) if number else numbers.parse(payload)
            result = self._document(route, document, arrival)
            if isinstance(result, str):
                name = route.characteristic.plan.name
                result = self._set_aside(result, name, arrival, topic, payload)
            outputs = (*outputs, *result) if outputs else result
        return outputs

    def _document(self, route: _Route, document: object, arrival: int) -> Sequence[Output] | str:
        characteristic, levels, counter = route
        if document is numbers.NOT_JSON:
            return "not-json"
        decoder = characteristic.decoder
        sequence = judge_sequence(decoder.sequence(document))
        found = decoder.find(document, levels)
        result: Sequence[Output] | str
        if isinstance(found, str):
            result = found
        else:
            keys, value, at = found
            result = self._judge(
                characteristic, keys, value, at, decoder.timed, sequence, arrival, counter
            )
        if counter is not None and sequence is not None and isinstance(result, str):
            counter.note(sequence)
        return result

    def _row(self, row: Reading, arrival: int) -> Sequence[Output]:
        self.counts.messages += 1
        characteristic = self._characteristics.get(row.characteristic)
        reason = "no-topic"
        if characteristic is not None:
            keys = characteristic.decoder.row(row.stream)
            reason = "no-stream"
            if keys is not None:
                sequence = judge_sequence(row.sequence)
                result = self._judge(
                    characteristic, keys, row.value, row.at, True, sequence, arrival, None
                )
                if not isinstance(result, str):
                    return result
                reason = result
        shown = str(row.value).encode(errors="replace")
        return self._set_aside(reason, row.characteristic, arrival, "", shown)

    def _judge(
        self,
        characteristic: Characteristic,
        keys: tuple[str, ...],
        raw: object,
        at: object,
        timed: bool,
        sequence: int | None,
        arrival: int,
        counter: TopicCounter | None,
    ) -> Sequence[Output] | str:
        state = characteristic.streams.get(keys)
        if state is None and len(characteristic.streams) >= MAX_STREAMS:
            return "no-stream"
        value = characteristic.decoder.judge_value(raw)
        if isinstance(value, str):
            return value
        moment = judge_time(at, arrival) if timed else arrival
        if isinstance(moment, str):
            return moment
        if state is None:
            stream = tuple(zip(characteristic.decoder.keys, keys, strict=True))
            state = StreamState(characteristic.plan, stream, arrival)
            characteristic.streams[keys] = state
        if not timed:
            # To a stream arrival never runs backwards, whatever else came before.
            moment = max(moment, state.seen.mark)
        verdict = state.seen.admit(moment, timed, sequence)
        if verdict is Verdict.REPEATED or verdict is Verdict.LATE:
            return str(verdict.value)
        self.counts.readings += 1
        outputs: Sequence[Output] = ()
        if verdict is Verdict.RESTART:
            outputs = self._gauge_restarted(state, moment)
        if counter is not None and sequence is not None:
            self.counts.missing += counter.advance(sequence, verdict is Verdict.RESTART)
        identity: Identity
        if timed or sequence is not None:
            identity = (sequence, moment if timed else None, None, None)
        else:
            identity = (None, None, moment, state.seen.place)
        if timed:
            self.lag = arrival - moment
        gatherer = state.gatherer
        abandoned = gatherer.abandoned
        subgroup = gatherer.add(value, moment, identity)
        self.counts.abandoned += gatherer.abandoned - abandoned
        if subgroup is None:
            return outputs
        judged = self._subgroup(state, subgroup)
        return (*outputs, *judged) if outputs else judged

    # Subgroups, detectors, alerts

    def _subgroup(self, state: StreamState, subgroup: Subgroup) -> Sequence[Output]:
        counts = self.counts
        counts.subgroups += 1
        z = state.standardised(subgroup)
        state.lookback.append(z, subgroup.first)
        state.last = subgroup
        self.touched[state] = None
        signals: list[tuple[DetectorPlan, Signal]] = []
        rows: tuple[Row, ...] = ()
        for plan, each in state.detectors:
            met = each.step(subgroup)
            if met:
                signals += [(plan, signal) for signal in met]
            if self._points:
                rows += each.rows(plan.name, met)
        counts.signals += len(signals)
        outputs: list[Output] = []
        if self._points:
            outputs.append(Points(state.plan, state.stream, subgroup, rows))
        for event in state.alerts.judge(subgroup, z, signals, state.lookback):
            counts.alerts += 1
            outputs.append(Alert(state.plan, state.stream, event))
        return outputs

    def _gauge_restarted(self, state: StreamState, time: int) -> list[Output]:
        """The gauge counts afresh: what it sends does not continue what it sent."""
        gatherer = state.gatherer
        abandoned = gatherer.abandoned
        gatherer.abandon()
        self.counts.abandoned += gatherer.abandoned - abandoned
        for _, each in state.detectors:
            each.restart()
        state.lookback.clear()
        events = state.alerts.withdraw(time, "gauge-restart")
        self.counts.alerts += len(events)
        self.touched[state] = None
        return [Alert(state.plan, state.stream, event) for event in events]

    # Topics and what is set aside

    def _route(self, topic: str) -> tuple[_Route, ...]:
        wild = "+" in topic or "#" in topic  # a recording may hold what no broker delivers
        found: list[_Route] = []
        counters: dict[SequencePlan, TopicCounter] = {}
        for each in self._characteristics.values():
            source = each.plan.source
            if wild or not filters.overlap(source.topic, topic):
                continue
            counter = None
            if source.sequence is not None:
                # Characteristics that read one counter of a topic miss a number together.
                fresh = TopicCounter(source.sequence.wraps)
                counter = counters.setdefault(source.sequence, fresh)
            found.append(_Route(each, each.decoder.levels(topic), counter))
        if len(self._routes) >= _MAX_ROUTES:
            self._routes.clear()
        routes = self._routes[topic] = tuple(found)
        return routes

    def _set_aside(
        self, reason: str, characteristic: str | None, time: int, topic: str, payload: bytes
    ) -> tuple[SetAside]:
        counts = self.counts.set_aside
        counts[reason] = counts.get(reason, 0) + 1
        return (SetAside(reason, characteristic, time, topic, payload),)
