"""The simulated jar line: the messages its gauges send, made from a scene and a seed.

Knows the line (six fill heads, checkweigher, capper, glue thermometer) and how its readings vary.
Must not know brokers, files or the wall clock: the same scene, seed and start give the same bytes.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import count

import numpy as np
import orjson

from monitor.demo.scenes import Cause, Gateway, Scene, Wander
from monitor.entries import Message
from monitor.times import SECOND, format_time

HEADS = 6
ROUND = 5  # turns of the filler that share each head's between-subgroup offset
PIECE = 0.1  # seconds: 600 pieces a minute
TORQUE_EVERY = 1.0  # seconds: one cap in ten is measured
GLUE_EVERY = 5.0  # seconds

PREFIX = "plant/jar-line-2"
START = 1_772_431_200 * SECOND  # 2026-03-02T06:00:00Z, where a recording begins

NET_WEIGHT, CAP_TORQUE, GLUE_TEMPERATURE = "net-weight", "cap-torque", "glue-temperature"


@dataclass(frozen=True, slots=True)
class Normal:
    """How a characteristic varies with nothing wrong: ``sigma`` of single readings around a centre
    that moves by ``between`` from one subgroup to the next."""

    mean: float
    sigma: float
    between: float = 0.0


BASELINES = {
    NET_WEIGHT: Normal(341.2, 1.9, 0.4),
    CAP_TORQUE: Normal(2.05, 0.11),
    GLUE_TEMPERATURE: Normal(165.0, 0.6),
}
UNITS = {NET_WEIGHT: "g", CAP_TORQUE: "N·m", GLUE_TEMPERATURE: "°C"}
UNDATED = {CAP_TORQUE}
"""What is measured by a gauge that sends no time."""

TOLERANCE = (331.0, 352.0)  # g; the checkweigher rejects outside it

SPACING = {
    NET_WEIGHT: round(HEADS * PIECE, 3),
    CAP_TORQUE: TORQUE_EVERY,
    GLUE_TEMPERATURE: GLUE_EVERY,
}
"""Seconds of line time between two readings of one stream."""


def messages(
    scene: Scene,
    seed: int,
    *,
    start: int = START,
    seconds: float | None = None,
    prefix: str = PREFIX,
) -> Iterator[Message]:
    """The scene's messages in order of arrival, times in microseconds since 1970.

    ``seconds`` of line time (the scene's own where None); a longer run begins with the bytes of a
    shorter one, and scenes of one seed share their common-cause noise.
    """
    seconds = scene.seconds if seconds is None else seconds
    weights, gateway, torques, glue = (np.random.default_rng([seed, i]) for i in range(4))
    return heapq.merge(
        _through(
            _checkweigher(scene, weights, start, seconds, prefix), scene.gateway, gateway, start
        ),
        _capper(scene, torques, start, seconds, prefix),
        _thermometer(glue, start, seconds, prefix),
        key=lambda message: message.time,
    )


def _checkweigher(
    scene: Scene, rng: np.random.Generator, start: int, seconds: float, prefix: str
) -> Iterator[Message]:
    """Lane 1 weighs every jar: the heads in turn, one counter for all of them."""
    normal = BASELINES[NET_WEIGHT]
    causes = [cause for cause in scene.causes if cause.characteristic == NET_WEIGHT]
    topic = f"{prefix}/checkweigher/1/reading"
    wander = scene.wander or Wander(0.0, 0.0)
    drive = wander.sd * np.sqrt(1 - wander.phi**2)
    wandered = wander.sd * rng.standard_normal(HEADS)
    pieces = round(seconds / PIECE)
    number = 0
    while number < pieces:
        within = normal.sigma * rng.standard_normal((ROUND, HEADS))
        offset = normal.between * rng.standard_normal(HEADS) + wandered
        wandered = wander.phi * wandered + drive * rng.standard_normal(HEADS)
        for turn in within:
            for head in range(HEADS):
                if number == pieces:
                    return
                elapsed = number * PIECE
                shift, spread = _effect(causes, elapsed, head + 1)
                net = round(float(normal.mean + offset[head] + spread * turn[head] + shift), 1)
                number += 1
                time = start + round(elapsed * SECOND)
                payload = {
                    "t": format_time(time),
                    "n": number,
                    "head": head + 1,
                    "net": net,
                    "verdict": "accept" if TOLERANCE[0] <= net <= TOLERANCE[1] else "reject",
                }
                yield Message(time, topic, orjson.dumps(payload))


def _capper(
    scene: Scene, rng: np.random.Generator, start: int, seconds: float, prefix: str
) -> Iterator[Message]:
    """A gauge that sends bare numbers, N·m: no time, no counter."""
    normal = BASELINES[CAP_TORQUE]
    causes = [cause for cause in scene.causes if cause.characteristic == CAP_TORQUE]
    for elapsed in _ticks(TORQUE_EVERY, seconds):
        shift, spread = _effect(causes, elapsed, None)
        value = normal.mean + spread * normal.sigma * rng.standard_normal() + shift
        time = start + round(elapsed * SECOND)
        yield Message(time, f"{prefix}/capper/torque", orjson.dumps(round(value, 3)))


def _thermometer(
    rng: np.random.Generator, start: int, seconds: float, prefix: str
) -> Iterator[Message]:
    """Glue temperature at the labeller, °C: one slow reading at a time."""
    normal = BASELINES[GLUE_TEMPERATURE]
    for elapsed in _ticks(GLUE_EVERY, seconds):
        value = normal.mean + normal.sigma * rng.standard_normal()
        time = start + round(elapsed * SECOND)
        payload = {"t": format_time(time), "temperature": round(value, 1)}
        yield Message(time, f"{prefix}/labeller/glue", orjson.dumps(payload))


def _ticks(every: float, seconds: float) -> Iterator[float]:
    for i in count():
        if i * every >= seconds:
            return
        yield i * every


def _effect(causes: list[Cause], elapsed: float, head: int | None) -> tuple[float, float]:
    """What the causes add to a reading, and what they multiply its spread by."""
    shift, spread = 0.0, 1.0
    for cause in causes:
        if cause.head is None or cause.head == head:
            grown = cause.grown(elapsed)
            if cause.kind == "shift":
                shift += grown * cause.size
            else:
                spread *= 1 + grown * (cause.size - 1)
    return shift, spread


def _through(
    sent: Iterator[Message], gateway: Gateway, rng: np.random.Generator, start: int
) -> Iterator[Message]:
    """What the gateway passes on: each message's time becomes that of its arrival."""
    held: list[tuple[int, int, bytes]] = []  # heap of (number that lets it go, its own, payload)
    outages = [
        (start + round(begin * SECOND), start + round((begin + length) * SECOND))
        for begin, length in gateway.outages
    ]
    for number, message in enumerate(sent):
        repeated, delayed, dropped = rng.random(3) < (gateway.repeat, gateway.delay, gateway.drop)
        passing = int(rng.integers(1, gateway.behind, endpoint=True))
        if dropped or any(begin <= message.time < end for begin, end in outages):
            continue
        if delayed:
            heapq.heappush(held, (number + passing, number, message.payload))
        else:
            yield message
            if repeated:
                yield message
        while held and held[0][0] <= number:
            yield Message(message.time, message.topic, heapq.heappop(held)[2])
