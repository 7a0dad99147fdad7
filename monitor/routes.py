"""From a concrete topic to the characteristics it carries, their streams and its counter.

Knows filters, stream values and how many of each there may be. Must not know payloads or readings.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from monitor import filters
from monitor.decode import Decoder, RowDecoder, judge_sequence
from monitor.plan import CharacteristicPlan, SequencePlan
from monitor.seen import TopicCounter
from monitor.stream import Counts, StreamState

MAX_STREAMS = 10_000
"""Streams a characteristic may have: a guard against a field that was no stream key."""

_MAX_TOPICS = 20_000


class Characteristic:
    """A characteristic's plan, its decoder and its streams, by their values in key order."""

    __slots__ = ("decoder", "plan", "streams")

    def __init__(self, plan: CharacteristicPlan) -> None:
        self.plan = plan
        self.decoder = Decoder(plan.source)
        self.streams: dict[tuple[str, ...], StreamState] = {}

    def may_open(self, keys: tuple[str, ...]) -> bool:
        """Whether the stream is there, or there is room for it."""
        return keys in self.streams or len(self.streams) < MAX_STREAMS

    def open(self, keys: tuple[str, ...], since: int, counts: Counts) -> StreamState:
        """A new stream, first heard of at arrival ``since``."""
        stream = tuple(zip(self.decoder.keys, keys, strict=True))
        state = self.streams[keys] = StreamState(self.plan, stream, since, counts)
        return state


class Route:
    """One characteristic on one topic; ``known`` finds streams by what ``decoder.find`` gave."""

    __slots__ = ("characteristic", "counter", "decoder", "known", "levels")

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

    def __init__(self, characteristics: Iterable[Characteristic]) -> None:
        self._characteristics = tuple(characteristics)
        self.known: dict[str, tuple[Route, ...]] = {}
        self.tables = {
            c.plan.name: Route(c, RowDecoder(c.plan.source)) for c in self._characteristics
        }
        self._counters: dict[tuple[str, SequencePlan], TopicCounter] = {}

    def find(self, topic: str) -> tuple[Route, ...]:
        """Where messages on ``topic`` lead, in the order of the configuration; known from now."""
        if len(self.known) >= _MAX_TOPICS:
            self.known.clear()
            self._counters.clear()
        found = []
        wild = "+" in topic or "#" in topic  # a recording may hold what no broker delivers
        for each in self._characteristics:
            source = each.plan.source
            if not wild and filters.overlap(source.topic, topic):
                sequence = source.sequence
                counter = None if sequence is None else self._counter(topic, sequence)
                found.append(Route(each, each.decoder, each.decoder.levels(topic), counter))
        routes = self.known[topic] = tuple(found)
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
            self._counter(topic, plan).restore(remembered)

    def _counter(self, topic: str, plan: SequencePlan) -> TopicCounter:
        # Characteristics that read one counter of a topic miss a number together.
        return self._counters.setdefault((topic, plan), TopicCounter(plan.wraps))
