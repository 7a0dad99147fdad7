"""From a concrete topic to the characteristics it carries, their streams and its counter.

Knows filters, stream values and how many of each there may be. Must not know payloads or readings.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from monitor import filters
from monitor.decode import Decoder
from monitor.plan import CharacteristicPlan, SequencePlan
from monitor.seen import TopicCounter
from monitor.stream import StreamState

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

    def open(self, keys: tuple[str, ...], since: int) -> StreamState:
        """A new stream, first heard of at arrival ``since``."""
        stream = tuple(zip(self.decoder.keys, keys, strict=True))
        state = self.streams[keys] = StreamState(self.plan, stream, since)
        return state


class Route:
    """One characteristic on one topic; ``known`` finds a stream by ``Decoder.quick_key``."""

    __slots__ = ("characteristic", "counter", "known", "levels")

    def __init__(
        self,
        characteristic: Characteristic,
        levels: tuple[str | None, ...],
        counter: TopicCounter | None,
    ) -> None:
        self.characteristic = characteristic
        self.levels = levels
        self.counter = counter
        self.known: dict[object, StreamState] = {}


class Routes:
    """All topics heard of so far."""

    __slots__ = ("_characteristics", "_counters", "_known")

    def __init__(self, characteristics: Iterable[Characteristic]) -> None:
        self._characteristics = tuple(characteristics)
        self._known: dict[str, tuple[Route, ...]] = {}
        self._counters: dict[tuple[str, SequencePlan], TopicCounter] = {}

    def of(self, topic: str) -> tuple[Route, ...]:
        """Where messages on ``topic`` lead, in the order of the configuration."""
        routes = self._known.get(topic)
        return self._find(topic) if routes is None else routes

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

    def _find(self, topic: str) -> tuple[Route, ...]:
        if len(self._known) >= _MAX_TOPICS:
            self._known.clear()
            self._counters.clear()
        if "+" in topic or "#" in topic:  # a recording may hold what no broker delivers
            return ()
        found = []
        for each in self._characteristics:
            source = each.plan.source
            if filters.overlap(source.topic, topic):
                sequence = source.sequence
                counter = None if sequence is None else self._counter(topic, sequence)
                found.append(Route(each, each.decoder.levels(topic), counter))
        routes = self._known[topic] = tuple(found)
        return routes

    def _counter(self, topic: str, plan: SequencePlan) -> TopicCounter:
        # Characteristics that read one counter of a topic miss a number together.
        return self._counters.setdefault((topic, plan), TopicCounter(plan.wraps))
