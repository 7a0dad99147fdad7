"""A recording as it was sent: which messages, and when each is due.

Knows recordings and pace. Must not know MQTT or the command line.
"""

from __future__ import annotations

import itertools
import time
from dataclasses import dataclass, field
from typing import Protocol

from monitor import numbers
from monitor.entries import Message, Parsed
from monitor.times import SECOND
from replay.recordings import Recording
from replay.tables import Layout

_EXAMPLES = 5


class Publisher(Protocol):
    """Who takes messages to the broker."""

    def publish(self, topic: str, payload: bytes, *, retain: bool) -> None:
        """Take one; ValueError where no broker could."""

    def wait(self, seconds: float) -> None:
        """Do what is to be done meanwhile; may come back sooner."""


@dataclass(slots=True)
class Sent:
    """How far a recording has been sent; ``at`` is the arrival (µs) of its latest message."""

    messages: int = 0
    control: int = 0
    wrong: int = 0
    wrong_at: list[str] = field(default_factory=list)
    """The first few lines that could not be sent: file, line, why."""
    line: int = 0
    at: int | None = None
    stopping: bool = False
    """Set by whoever wants it to end before its time; between two messages, it does."""


def send(recording: Recording, publisher: Publisher, speed: float | None, sent: Sent) -> None:
    """Publish every message, ``speed`` times as fast as it arrived; None: as fast as it goes.

    ``sent`` is kept up to date, for whoever is told while it runs. What is behind its time, since
    the broker was away or arrivals run backwards, goes at once.
    """

    def wrong(_: object, number: int, why: str) -> None:
        sent.wrong += 1
        if len(sent.wrong_at) < _EXAMPLES:
            sent.wrong_at.append(f"{recording.path}:{number}: {why}")

    zero: float | None = None  # when an arrival at 1970 would have been due, on our clock
    for chunk in recording.open(Layout((), {}, None), itertools.count(), wrong).chunks:
        for number, entry in enumerate(chunk.entries, chunk.first):
            match entry:
                case None:
                    continue
                case Parsed(at, topic, document):
                    payload, retain = numbers.text(document), False
                case Message(at, topic, payload, retain):
                    pass
                case _:
                    sent.control += 1
                    continue
            if sent.stopping:
                raise KeyboardInterrupt
            if speed is not None:
                seconds = at / SECOND / speed
                zero = time.monotonic() - seconds if zero is None else zero
                while (left := zero + seconds - time.monotonic()) > 0:
                    publisher.wait(left)
            try:
                publisher.publish(topic, payload, retain=retain)
            except ValueError as error:
                wrong(recording, number, str(error))
            else:
                sent.messages += 1
            sent.line, sent.at = number, at
