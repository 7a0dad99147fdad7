"""From a concrete topic to the characteristics it carries, their streams and its counter.

Knows filters, stream values and how many of each there may be. Must not know payloads or readings.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import Any

from monitor import filters
from monitor.alerts import Numbering
from monitor.decode import Decoder, RowDecoder, judge_sequence
from monitor.gauge import GaugeAlerts
from monitor.outputs import Output
from monitor.plan import CharacteristicPlan, SequencePlan
from monitor.seen import TopicCounter
from monitor.stream import Counts, StreamState

MAX_STREAMS = 10_000
"""Streams a characteristic may have: a guard against a field that was no stream key."""

_MAX_TOPICS = 20_000


class Characteristic:
    """A characteristic's plan, its decoder and its streams, by their values in key order."""

    __slots__ = ("decoder", "gauge", "plan", "sequence", "streams")

    def __init__(self, plan: CharacteristicPlan) -> None:
        self.plan = plan
        self.decoder = Decoder(plan.source)
        self.streams: dict[tuple[str, ...], StreamState] = {}
        self.sequence = Numbering()
        self.gauge = GaugeAlerts(plan, self.sequence)

    def adopt(self, before: Characteristic) -> None:
        """Go on with the gauge alerts of the same characteristic under another plan, and take its
        streams over where their keys are still the same."""
        self.gauge, self.sequence = before.gauge, before.sequence
        self.gauge.reconfigure(self.plan)
        if before.decoder.keys == self.decoder.keys:
            self.streams, before.streams = before.streams, {}

    def may_open(self, keys: tuple[str, ...]) -> bool:
        """Whether the stream is there, or there is room for it."""
        return keys in self.streams or len(self.streams) < MAX_STREAMS

    def open(self, keys: tuple[str, ...], since: int, counts: Counts) -> StreamState:
        """A new stream, first heard of at arrival ``since``."""
        stream = tuple(zip(self.decoder.keys, keys, strict=True))
        # Where there is but one stream, its events and the gauge's are counted together.
        sequence = Numbering() if keys else self.sequence
        state = self.streams[keys] = StreamState(self.plan, stream, since, counts, sequence)
        return state


Quick = Callable[[Any, int], Sequence[Output] | None]
"""(document, arrival) → outputs; None where it is not the usual, and nothing was touched."""


class Route:
    """One characteristic on one topic; ``known`` finds streams by what ``decoder.find`` gave."""

    __slots__ = ("characteristic", "counter", "decoder", "known", "levels", "quick")

    def __init__(
        self,
        characteristic: Characteristic,
        decoder: Decoder,
        levels: tuple[str | None, ...] = (),
        counter: TopicCounter | None = None,
    ) -> None:
        self.characteristic = characteristic
        self.decoder = decoder
        self.levels = levels
        self.counter = counter
        self.known: dict[object, StreamState] = {}
        self.quick: Quick | None = None

    def note(self, document: object) -> None:
        """The document was set aside; its number is not missing."""
        if self.counter is not None:
            *_, sequence = self.decoder.find(document)
            number = judge_sequence(sequence)
            if number is not None:
                self.counter.note(number)


class Routes:
    """Where every topic heard of so far leads, and every table: ``known`` and ``tables``."""

    __slots__ = ("_characteristics", "_counters", "known", "tables")

    def __init__(
        self, characteristics: Iterable[Characteristic], before: Routes | None = None
    ) -> None:
        self._characteristics = tuple(characteristics)
        self.known: dict[str, tuple[Route, ...]] = {}
        self.tables = {
            c.plan.name: Route(c, RowDecoder(c.plan.source)) for c in self._characteristics
        }
        self._counters: dict[tuple[str, SequencePlan], TopicCounter] = (
            {} if before is None else before._counters
        )

    def find(self, topic: str) -> tuple[Route, ...]:
        """Where messages on ``topic`` lead, in the order of the configuration; known from now."""
        if len(self.known) >= _MAX_TOPICS:
            self.known.clear()
        wild = "+" in topic or "#" in topic  # a recording may hold what no broker delivers
        found = [
            each
            for each in self._characteristics
            if not wild and filters.overlap(each.plan.source.topic, topic)
        ]
        counted = {(topic, c.plan.source.sequence) for c in found if c.plan.source.sequence}
        new = sum(key not in self._counters for key in counted)
        if new and len(self._counters) + new > _MAX_TOPICS:
            # Decided by what is in the state alone: a restored engine counts on as any other.
            self.known.clear()
            self._counters.clear()
        routes = self.known[topic] = tuple(
            Route(
                each,
                each.decoder,
                each.decoder.levels(topic),
                self._counter(topic, each.plan.source.sequence),
            )
            for each in found
        )
        return routes

    def state(self) -> list[Any]:
        """Every counter, as JSON values."""
        return [
            [topic, list(plan.pointer), plan.wraps, counter.state()]
            for (topic, plan), counter in self._counters.items()
        ]

    def restore(self, state: Iterable[Any]) -> None:
        """Take back what ``state`` gave."""
        for topic, pointer, wraps, remembered in state:
            plan = SequencePlan(tuple(pointer), wraps)
            counter = self._counters[topic, plan] = TopicCounter(wraps)
            counter.restore(remembered)

    def _counter(self, topic: str, plan: SequencePlan | None) -> TopicCounter | None:
        # Characteristics that read one counter of a topic miss a number together.
        if plan is None:
            return None
        return self._counters.setdefault((topic, plan), TopicCounter(plan.wraps))
