"""Anything at all between good readings: the alerts are those of the good ones alone.

The long form, with 100,000 payloads: ``pytest -m long tests/faults``.
"""

from __future__ import annotations

import functools
import json
import random
from pathlib import Path

import pytest
from brokers import Broker
from daemons import until, weighings, with_
from faulty import (
    SHORT_ALERTS,
    TORQUE,
    Feed,
    Published,
    Watcher,
    check_once,
    faulty,
    torques,
    undisturbed,
)
from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis import strategies as st

from monitor.entries import Message
from monitor.recording_lines import write_jsonl

Garbage = tuple[str, bytes]

REAL = [payload for _, payload in weighings(50, seed=9)]
ELSEWHERE = "line-2/scale/{}/reading"
"""Lanes of their own: what is a reading after all moves no good stream there."""

numbers = st.one_of(
    st.integers(),
    st.floats(),
    st.sampled_from([0, -0.0, 1e308, -1e308, 2**63, -(2**63) - 1, 2**64, 10**400, 5e-324]),
)
scalars = st.one_of(
    st.none(),
    st.booleans(),
    numbers,
    st.text(max_size=8),
    st.sampled_from(["340.0", " 340", "0x1", "NaN", "1e400", "\ud800", "\x00", "2026-03-02", "١"]),
)
documents = st.recursive(
    scalars,
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=4), inner, max_size=3)
    ),
    max_leaves=5,
)
times = st.one_of(
    documents,
    st.datetimes().map(lambda moment: moment.isoformat()),
    st.datetimes().map(lambda moment: f"{moment.isoformat()}+00:00"),
    st.sampled_from(["2099-12-31T23:59:59Z", "0001-01-01T00:00:00Z", "2026-02-30T00:00:00Z", "T"]),
)
fields = {"t": times, "n": documents, "head": documents, "net": documents, "x": documents}
readings = st.fixed_dictionaries({}, optional=fields)


@st.composite
def nearly(draw: st.DrawFn) -> object:
    """A real reading of which one or two fields are not what they should be, or are not there."""
    reading = json.loads(draw(st.sampled_from(REAL)))
    for name in draw(st.sets(st.sampled_from(sorted(fields)), min_size=1, max_size=2)):
        if draw(st.integers(0, 3)):
            reading[name] = draw(fields[name])
        else:
            reading.pop(name, None)
    return reading


@st.composite
def mutated(draw: st.DrawFn) -> bytes:
    """A real payload with some of its bytes changed, dropped, put in or sent twice."""
    payload = bytearray(draw(st.sampled_from(REAL)))
    for _ in range(draw(st.integers(1, 4))):
        at = draw(st.integers(0, len(payload)))
        match draw(st.integers(0, 4)):
            case 0:
                payload[at : at + 1] = bytes([draw(st.integers(0, 255))])
            case 1:
                del payload[at : at + draw(st.integers(1, 8))]
            case 2:
                payload[at:at] = draw(st.binary(min_size=1, max_size=8))
            case 3:
                payload[at:at] = draw(st.sampled_from([b"0", b"9", b"-", b"e9", b'"', b"[", b"{"]))
            case _:
                payload += payload[at:]
    return bytes(payload)


def written(document: object) -> bytes:
    """As a gauge would send it, however little of it is JSON."""
    return json.dumps(document).encode()


payloads = st.one_of(
    st.binary(max_size=60),
    documents.map(written),
    readings.map(written),
    nearly().map(written),
    nearly().map(written),
    st.sampled_from([1, 9, 999, 20_000]).map(lambda depth: b"[" * depth),
    st.integers(1, 2_000).map(lambda depth: b'{"net":' * depth + b"1" + b"}" * depth),
    mutated(),
    mutated(),
)
# Brokers refuse topics with control characters and with what is no character.
levels = st.text(
    st.characters(exclude_categories=["Cs", "Cc", "Cn"], exclude_characters="+#/"),
    max_size=6,
)
lanes = st.one_of(st.sampled_from(["1", "2"]), levels.filter(lambda lane: lane not in "12"))
garbage = st.tuples(st.one_of(lanes.map(ELSEWHERE.format), st.just(TORQUE)), payloads)


def could_be_a_reading(payload: bytes) -> bool:
    """Whether the payload might be one for the scale: written for this test, and far too wide."""
    try:
        document = json.loads(payload)
    except (ValueError, RecursionError):
        return False
    return isinstance(document, dict) and {"t", "head", "net"} <= document.keys()


def could_be_a_value(payload: bytes) -> bool:
    """The same for the capper."""
    try:
        document = json.loads(payload)
    except (ValueError, RecursionError):
        return False
    return isinstance(document, int | float | str)


def harmless(message: Garbage) -> Garbage:
    """The same garbage where, should it be a reading, it is none of the good streams'."""
    topic, payload = message
    if topic == TORQUE:
        if not could_be_a_value(payload):
            return message
    elif topic not in map(ELSEWHERE.format, "12") or not could_be_a_reading(payload):
        return message
    return ELSEWHERE.format("elsewhere"), payload


@functools.cache
def generated(count: int) -> list[Garbage]:
    """So many different pieces of garbage, the same each time."""
    found: list[Garbage] = []

    @seed(count)
    @settings(
        max_examples=count // 40,
        database=None,
        deadline=None,
        phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @given(st.lists(garbage, min_size=40, max_size=60))
    def gather(some: list[Garbage]) -> None:
        found.extend(some)

    gather()
    assert len(found) >= count
    return [harmless(message) for message in found[:count]]


def shuffled_in(good: Published, bad: Published, chance: random.Random) -> Published:
    """Both in their own order, one between the other as it happens."""
    turns = [True] * len(good) + [False] * len(bad)
    chance.shuffle(turns)
    goods, bads = iter(good), iter(bad)
    return [next(goods if turn else bads) for turn in turns]


def of_good_streams(alerts: list[bytes]) -> list[bytes]:
    """The alerts that garbage could only have bent."""
    lanes = [json.loads(alert)["stream"].get("lane") for alert in alerts]
    return [alert for alert, lane in zip(alerts, lanes, strict=True) if lane in ("1", "2", None)]


@pytest.mark.parametrize("count", [5_000, pytest.param(100_000, marks=pytest.mark.long)])
def test_garbage_bends_no_alert(count: int, broker: Broker, tmp_path: Path) -> None:
    pairs = zip(weighings(2_000), torques(2_000, broker=broker), strict=True)
    good = [message for pair in pairs for message in pair]
    oversized = [(topic, b"[%s]" % (b" " * 300_000)) for topic, _ in good[:3]]
    messages = shuffled_in(good, [*oversized, *generated(count)], random.Random(count))
    with (
        Watcher(broker.port) as watcher,
        faulty(tmp_path / "a", broker.port, with_(alerts=SHORT_ALERTS)) as daemon,
    ):
        process = daemon.online().process
        with Feed(broker.port, messages, 4_000) as feed:
            feed.await_sent(len(messages))
        daemon.await_count(len(messages))
        until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
        assert process is daemon.process
        assert daemon.stop() == 0
        alerts = of_good_streams(watcher.alerts_until_farewell())
        counts = watcher.last_health()["counts"]
    check_once(sorted(daemon.journaled()), sorted(messages))
    assert counts["messages"] == len(messages)
    assert counts["readings"] + sum(counts["set_aside"].values()) == len(messages)
    assert len(counts["set_aside"]) > 8, counts
    known = set(good)
    alone = tmp_path / "alone.jsonl"
    with alone.open("wb") as file:
        entries = daemon.entries()
        write_jsonl(
            file,
            (e for e in entries if not isinstance(e, Message) or (e.topic, e.payload) in known),
        )
    assert alerts == undisturbed(daemon.configuration, alone)
    assert {json.loads(alert)["characteristic"] for alert in alerts} == {"net-weight", "cap-torque"}
