"""Several recordings as one stream, in the order in which it arrived.

Knows arrivals. Must not know files, or what an entry means.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterator, Sequence
from itertools import chain

from replay.recordings import Chunk, Opened

_NEVER = -(2**63)

_Place = tuple[int, int]
"""Arrival (µs), then place among the sources: a recording named earlier comes first."""


def in_order(recordings: Sequence[Opened]) -> Iterator[Chunk]:
    """The chunks of all, or parts of them, by arrival.

    What stands in one recording keeps its order: where its arrivals run backwards, an entry counts
    as arriving no earlier than those before it. Tables without times follow one another.
    """
    timeless = [each.chunks for each in recordings if not each.timed]
    sources = [each.chunks for each in recordings if each.timed]
    if timeless:
        sources.append(chain.from_iterable(timeless))
    if len(sources) == 1:
        return sources[0]
    return _merged(sources)


def _merged(sources: Sequence[Iterator[Chunk]]) -> Iterator[Chunk]:
    feeds = [_Feed(number, source) for number, source in enumerate(sources)]
    heap = [(feed.next, feed) for feed in feeds if feed.next is not None]
    heapq.heapify(heap)
    while heap:
        feed = heap[0][1]
        yield feed.take(min(heap[1:3])[0] if len(heap) > 1 else None)  # the next is one of two
        if feed.next is None:
            heapq.heappop(heap)
        else:
            heapq.heapreplace(heap, (feed.next, feed))


class _Feed:
    """One source; ``next`` is the place of what it gives next, None at its end."""

    def __init__(self, number: int, source: Iterator[Chunk]) -> None:
        self.next: _Place | None = None
        self._number = number
        self._source = source
        self._at = 0
        self._latest = _NEVER
        self._refill()

    def take(self, until: _Place | None) -> Chunk:
        """What is at hand and comes before ``until``, where another source goes on."""
        chunk, start, latest = self._chunk, self._at, self._latest
        entries = chunk.entries
        if until is not None:
            for index in range(start, len(entries)):
                entry = entries[index]
                if entry is not None and entry.time > latest:
                    if (entry.time, self._number) > until:
                        self._at, self._latest = index, latest
                        self.next = entry.time, self._number
                        return Chunk(chunk.recording, chunk.first + start, entries[start:index])
                    latest = entry.time
        self._latest = latest
        self._refill()
        return Chunk(chunk.recording, chunk.first + start, entries[start:]) if start else chunk

    def _refill(self) -> None:
        self._at, self.next = 0, None
        for chunk in self._source:
            time = next((entry.time for entry in chunk.entries if entry is not None), None)
            if time is not None:
                self._chunk = chunk
                self.next = max(time, self._latest), self._number
                return
