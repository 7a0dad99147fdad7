"""The fold: what is set aside and why, what leaves no trace, what starts afresh."""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import (
    GAUGE,
    START,
    TOPIC,
    characteristic,
    engine,
    events,
    fold,
    kinds,
    message,
    points,
    reading,
    readings,
    reasons,
    shewhart,
)

from monitor import messages
from monitor.decode import MAX_PAYLOAD
from monitor.engine import Engine
from monitor.entries import Connected, Disconnected, Entry, Message, Parsed, Reading, Started
from monitor.numbers import NOT_JSON, parse
from monitor.outputs import Alert, Output, SetAside
from monitor.plan import (
    CharacteristicPlan,
    Chart,
    CusumPlan,
    EwmaPlan,
    RulePlan,
    SequencePlan,
    SourcePlan,
)
from monitor.routes import MAX_STREAMS
from monitor.times import SECOND

NOW = START / SECOND

CHECKWEIGHER = SourcePlan(
    topic="line/+/weight",
    captures=((1, "lane"),),
    payload="json",
    value=("net",),
    time=("t",),
    sequence=SequencePlan(("n",)),
    stream=(("head", ("head",)),),
    use_if=((("verdict",), ("accept",)),),
    plausible_lower=0.0,
    plausible_upper=1000.0,
)
LANE = "line/1/weight"
GOOD: dict[str, Any] = {"net": 341.6, "t": NOW, "n": 7, "head": 4, "verdict": "accept"}


def checkweigher() -> Engine:
    return engine(characteristic(source=CHECKWEIGHER, mean=341.2, sigma=1.9))


def without(key: str, **changes: object) -> dict[str, Any]:
    return {k: v for k, v in (GOOD | changes).items() if k != key}


def text(**changes: object) -> bytes:
    return json.dumps(GOOD | changes).encode()


# Readings in: each reason, and of two reasons the earlier

LATER = reading(341.6, 1, 8)
BIG = b" " * (MAX_PAYLOAD + 1)


@pytest.mark.parametrize(
    ("reason", "topic", "payload", "retain"),
    [
        ("oversized", LANE, text() + BIG, False),
        ("oversized", LANE, BIG, True),  # and retained
        ("retained", LANE, text(), True),
        ("retained", "line/elsewhere", text(), True),  # and no-topic
        ("no-topic", "line/elsewhere", text(), False),
        ("no-topic", "line/1/weight/more", b"{", False),  # and not-json
        ("no-topic", "line/+/weight", text(), False),
        ("no-topic", "line/#", text(), False),
        ("no-topic", "#", text(), False),
        ("no-topic", "", text(), False),
        ("not-json", LANE, b"", False),
        ("not-json", LANE, b"341.6 g", False),
        ("not-json", LANE, b"\xff\xfe", False),
        ("not-json", LANE, text(verdict="reject")[:-1], False),  # and not-used
        ("not-used", LANE, text(verdict="reject"), False),
        ("not-used", LANE, b"341.6", False),
        ("not-used", LANE, text(verdict="reject", head=None), False),  # and no-stream
        ("no-stream", LANE, json.dumps(without("head")).encode(), False),
        ("no-stream", LANE, text(head=True), False),
        ("no-stream", LANE, text(head={"number": 4}), False),
        ("no-stream", LANE, text(head=[4]), False),
        ("no-stream", "line//weight", text(), False),
        ("no-stream", LANE, text(head=None, net=None), False),  # and no-value
        ("no-value", LANE, json.dumps(without("net")).encode(), False),
        ("no-value", LANE, text(net=None), False),  # and not-a-number
        ("not-a-number", LANE, text(net="heavy"), False),
        ("not-a-number", LANE, text(net=True), False),
        ("not-a-number", LANE, text(net=[341.6]), False),
        ("not-a-number", LANE, text(net={"g": 341.6}), False),
        ("not-a-number", LANE, text(net="-Infinity"), False),  # and not-finite
        ("not-finite", LANE, text(net=math.nan), False),
        ("not-finite", LANE, text(net="1e999"), False),
        ("not-finite", LANE, text(net=10**400), False),
        ("not-finite", LANE, text(net=-math.inf), False),  # and implausible
        ("implausible", LANE, text(net=1000.1), False),
        ("implausible", LANE, json.dumps(without("t", net=-1)).encode(), False),  # and no-time
        ("no-time", LANE, json.dumps(without("t")).encode(), False),
        ("no-time", LANE, text(t=None), False),  # and bad-time
        ("bad-time", LANE, text(t="soon"), False),
        ("bad-time", LANE, text(t=False), False),
        ("bad-time", LANE, text(t="2026-03-02T06:41:12"), False),
        ("bad-time", LANE, text(t="2999-01-01T00:00:00"), False),  # and future
        ("future", LANE, text(t=NOW + 301), False),
        ("future", LANE, text(t=1e300), False),
    ],
)
def test_the_first_check_that_fails_names_the_reason(
    reason: str, topic: str, payload: bytes, retain: bool
) -> None:
    watching = checkweigher()
    entry = Message(START, topic, payload, retain)
    assert watching.fold(entry) == (
        SetAside(reason, None if reason in NAMELESS else "weight", START, topic, payload),
    )
    assert watching.counts.set_aside == {reason: 1}
    assert (watching.counts.messages, watching.counts.readings) == (1, 0)
    assert watching.streams() == []


NAMELESS = ("oversized", "retained", "no-topic")


@pytest.mark.parametrize(
    ("reason", "payload"),
    [
        ("repeated", text()),
        ("repeated", text(net="341.60", spare=1)),
        ("future", text(t=NOW + 301)),  # and repeated
        ("repeated", text(n=6, t=NOW - 1)),  # and late
        ("late", text(n=5, t=NOW - 0.5)),
        ("late", text(n=9, t=NOW - 0.5)),
        ("late", text(n=None, t=NOW - 0.5)),
        ("repeated", text(n=None)),
    ],
)
def test_what_the_stream_has_seen_comes_last(reason: str, payload: bytes) -> None:
    watching = checkweigher()
    good = [message(GOOD | {"n": 6, "t": NOW - 1}, topic=LANE), message(GOOD, topic=LANE)]
    assert reasons(fold(watching, good)) == []
    assert reasons(watching.fold(message(payload, topic=LANE))) == [reason]
    assert watching.counts.readings == 2


def test_the_largest_payload_is_read() -> None:
    watching = checkweigher()
    watching.fold(message(text().ljust(MAX_PAYLOAD), topic=LANE))
    assert watching.counts.readings == 1


def test_other_streams_and_later_numbers_are_no_repeats() -> None:
    watching = checkweigher()
    entries = [
        message(GOOD, topic=LANE),
        message(GOOD, topic="line/2/weight"),
        message(GOOD | {"head": 5}, topic=LANE),
        message(GOOD | {"n": 8}, topic=LANE),  # equal time
        message(GOOD | {"n": 9, "t": NOW + 300}, topic=LANE),  # as early as is no future
    ]
    assert reasons(fold(watching, entries)) == []
    assert [dict(s.stream) for s in watching.streams()] == [
        {"head": "4", "lane": "1"},
        {"head": "4", "lane": "2"},
        {"head": "5", "lane": "1"},
    ]


@pytest.mark.parametrize(
    ("payload", "reason"),
    [
        (b"341.6", None),
        (b" 341.6\n", None),
        (b'"341.6"', None),
        (b"null", "no-value"),
        (b"abc", "not-a-number"),
        (b"", "not-a-number"),
        (b"true", "not-a-number"),
        (b'{"net": 341.6}', "not-a-number"),
        (b"\xff", "not-a-number"),
        (b"NaN", "not-finite"),
        (b"1e999", "not-finite"),
        (b"1e101", "implausible"),
    ],
)
def test_a_payload_that_should_be_one_number(payload: bytes, reason: str | None) -> None:
    source = SourcePlan(topic=TOPIC, captures=(), payload="number")
    found = reasons(engine(characteristic(source=source)).fold(message(payload)))
    assert found == ([] if reason is None else [reason])


@pytest.mark.parametrize(
    ("row", "reason"),
    [
        (Reading(START, "weight", {"lane": "1", "head": "4"}, 341.6, NOW), None),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, "341.6", str(NOW), "7"), None),
        (Reading(START, "torque", {"lane": "1", "head": "4"}, 341.6, NOW), "no-topic"),
        (Reading(START, "weight", {"lane": "1"}, 341.6, NOW), "no-stream"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, None, NOW), "no-value"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, "heavy", NOW), "not-a-number"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, math.nan, NOW), "not-finite"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, 2000.0, NOW), "implausible"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, 341.6), "no-time"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, 341.6, "noon"), "bad-time"),
        (Reading(START, "weight", {"lane": "1", "head": "4"}, 341.6, NOW + 301), "future"),
    ],
)
def test_rows_of_tables_pass_the_same_checks(row: Reading, reason: str | None) -> None:
    assert reasons(checkweigher().fold(row)) == ([] if reason is None else [reason])


def test_ten_thousand_streams_are_judged_and_no_more() -> None:
    source = replace(GAUGE, stream=(("head", ("head",)),), time=None, sequence=None)
    watching = engine(characteristic(source=source), points=False)
    for head in range(MAX_STREAMS):
        watching.fold(message(f'{{"v": 0, "head": {head}}}'.encode()))
    assert MAX_STREAMS == 10_000
    assert watching.counts.readings == MAX_STREAMS
    assert reasons(watching.fold(message({"v": None, "head": "new"}))) == ["no-stream"]
    assert reasons(watching.fold(message({"v": 0, "head": 9_999}))) == []


def test_each_characteristic_reads_a_payload_its_own_way() -> None:
    plain = SourcePlan(TOPIC, (), "number")
    watching = engine(
        characteristic(name="one"),
        characteristic(name="two", source=plain),
        characteristic(name="three"),
    )
    outputs = watching.fold(message(b"oops"))
    assert reasons(outputs) == ["not-json", "not-a-number", "not-json"]


def test_two_characteristics_may_read_one_topic() -> None:
    light = replace(GAUGE, plausible_upper=10.0)
    watching = engine(
        characteristic(name="light", source=light), characteristic(name="heavy"), points=False
    )
    outputs = fold(watching, [reading(50, 0, 0), message(b"oops", 1)])
    assert [(o.reason, o.characteristic) for o in outputs if isinstance(o, SetAside)] == [
        ("implausible", "light"),
        ("not-json", "light"),
        ("not-json", "heavy"),
    ]
    assert [e["characteristic"] for e in events(outputs)] == ["heavy"]
    assert watching.counts.messages == 2


# What is set aside leaves no trace


def demanding(**changes: object) -> CharacteristicPlan:
    """All detectors, tight enough to signal often."""
    return characteristic(
        CusumPlan("individual", 0.25, 2.0, 0.5),
        EwmaPlan("individual", 0.3, 1.5),
        shewhart(
            RulePlan("outside", width=2.0),
            RulePlan("zone", count=2, of=3, width=1.0),
            RulePlan("run", length=3),
            RulePlan("trend", length=3),
            RulePlan("alternation", length=4),
            RulePlan("stratification", length=3, width=1.0),
            RulePlan("mixture", length=3, width=1.0),
        ),
        shewhart(chart="moving_range", width=1.5),
        max_gap=20 * SECOND,
        **changes,  # type: ignore[arg-type]
    )


SPLIT = replace(GAUGE, stream=(("head", ("head",)),), use_if=((("ok",), (True,)),))
PLANS = {
    "time and sequence": demanding(source=SPLIT),
    "time": demanding(source=replace(SPLIT, sequence=None)),
    "sequence": demanding(source=replace(SPLIT, time=None)),
    "neither": demanding(source=replace(SPLIT, time=None, sequence=None)),
    "plain number": demanding(source=SourcePlan(topic=TOPIC, captures=(), payload="number")),
    "wrapping": demanding(source=replace(SPLIT, sequence=SequencePlan(("n",), 8))),
}

values: st.SearchStrategy[object] = st.floats(-3, 3, width=16) | st.sampled_from(
    [None, True, "2.5", "heavy", [1], {}, 1e100, -1e100, 1e101, math.nan, math.inf, 10**400]
)
moments: st.SearchStrategy[object] = st.integers(-9, 40).map(lambda s: NOW + s) | st.sampled_from(
    [None, "2026-03-02T06:41:13Z", "2026-03-02T06:41:13", "soon", 1e300, -1e300, math.nan, [], 0]
)
counters: st.SearchStrategy[object] = st.integers(0, 12) | st.sampled_from(
    [None, -1, 2**62, 2**63, 2.5, "3", "x", True, 5_000]
)
bodies = st.one_of(
    st.fixed_dictionaries(
        {"v": values},
        optional={
            "t": moments,
            "n": counters,
            "head": st.sampled_from([1, "1", 2, 2.0, None, True, ""]),
            "ok": st.sampled_from([True, True, True, 1, False]),
        },
    ).map(lambda document: json.dumps(document).encode()),
    st.floats(-3, 3, width=16).map(lambda x: repr(x).encode()),
    st.binary(max_size=12),
    st.sampled_from([b"[" * 2_000, b"NaN", b"9" * 400, b"{}", b"null", BIG]),
)


def usable(second: int, value: float, head: int) -> Message:
    """A reading that every plan but the plain number's accepts."""
    return reading(value, second, second, head=head, ok=True)


def plain(second: int, value: float, head: int) -> Message:
    return message(repr(value).encode(), second)


good = st.lists(st.tuples(st.floats(-3, 3, width=16), st.integers(1, 2)), max_size=20)
hostile = st.lists(
    st.tuples(
        st.integers(0, 19),
        bodies,
        st.sampled_from([TOPIC, TOPIC, TOPIC, "line/#", "elsewhere"]),
        st.sampled_from([False, False, True]),
    ),
    max_size=12,
)


def encoded(outputs: Iterable[Output]) -> list[bytes]:
    return [messages.encode(output.event) for output in outputs if isinstance(output, Alert)]


@settings(max_examples=40)
@pytest.mark.parametrize("kind", PLANS)
@given(good, hostile)
def test_what_is_set_aside_moves_no_mark_and_no_limit(
    kind: str,
    good: list[tuple[float, int]],
    hostile: list[tuple[int, bytes, str, bool]],
) -> None:
    make: Callable[[int, float, int], Message] = plain if kind == "plain number" else usable
    entries = [make(second, *each) for second, each in enumerate(good)]
    for place, payload, topic, retain in reversed(hostile):
        second = min(place, len(good))
        entries.insert(second, Message(START + second * SECOND, topic, payload, retain))
    mixed, clean = engine(PLANS[kind]), engine(PLANS[kind])
    accepted: list[Entry] = []
    among: list[Output] = []
    for entry in entries:
        outputs = mixed.fold(entry)
        among += outputs
        if not any(isinstance(output, SetAside) for output in outputs):
            accepted.append(entry)
    alone = fold(clean, accepted)
    assert encoded(among) == encoded(alone)
    assert points(among) == points(alone)
    assert mixed.counts.readings == clean.counts.readings == len(accepted)


@settings(max_examples=60)
@pytest.mark.parametrize("kind", PLANS)
@given(st.lists(bodies.filter(lambda body: parse(body) is not NOT_JSON), max_size=20))
def test_a_parsed_message_is_the_message(kind: str, payloads: list[bytes]) -> None:
    whole, parsed = engine(PLANS[kind]), engine(PLANS[kind])
    for second, payload in enumerate(payloads):
        entry = message(payload, second)
        one = whole.fold(entry)
        other = parsed.fold(Parsed(entry.time, entry.topic, parse(payload)))
        assert reasons(one) == reasons(other)
        assert points(one) == points(other)
        assert encoded(one) == encoded(other)
    assert whole.counts == parsed.counts


@settings(max_examples=100)
@given(st.lists(st.tuples(bodies, st.integers(-50, 50)), max_size=30))
def test_whatever_comes_the_outputs_are_json_without_nan(
    given_payloads: list[tuple[bytes, int]],
) -> None:
    entries = [message(payload, second) for payload, second in given_payloads]
    for plan in PLANS.values():
        for output in fold(engine(plan), entries):
            if isinstance(output, Alert):
                finite(output.event)
                json.loads(messages.encode(output.event))


def finite(value: object) -> None:
    """Fails where a float anywhere in a message is no number: it would be sent as null."""
    if isinstance(value, dict):
        for each in value.values():
            finite(each)
    elif isinstance(value, list | tuple):
        for each in value:
            finite(each)
    elif isinstance(value, float):
        assert math.isfinite(value)


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("sigma", [1e-100, 1.0, 1e100])
@pytest.mark.parametrize("mean", [0.0, -1e100, 1e100])
@pytest.mark.parametrize("size", [1, 3])
def test_absurd_but_plausible_values_are_judged(sigma: float, mean: float, size: int) -> None:
    chart: Chart = "individual" if size == 1 else "mean"
    spread: Chart = "moving_range" if size == 1 else "range"
    plan = characteristic(
        CusumPlan(chart, 0.5, 5.0, 0.5, hold=True),
        CusumPlan(chart, 0.5, 5.0, clip=3.0),
        EwmaPlan(chart, 0.2, 3.0),
        shewhart(RulePlan("outside", width=3.0), RulePlan("run", length=4), chart=chart),
        shewhart(RulePlan("trend", length=4), RulePlan("alternation", length=4), chart=chart),
        shewhart(chart=spread),
        size=size,
        mean=mean,
        sigma=sigma,
    )
    series = [1e100, -1e100, 5e-324, 0.0, -5e-324, 1e100, 1e100, 1e100, 1.0, *[5e-324] * 9]
    outputs = fold(engine(plan), readings(series * 3))
    assert points(outputs)
    for event in events(outputs):
        finite(event)
        assert len(event["text"]) < 250
    for point in points(outputs):
        finite([list(row[3:7]) for row in point.rows])


# Counters and marks


def missing(entries: Iterable[Entry]) -> int:
    watching = engine(characteristic(source=replace(CHECKWEIGHER, plausible_upper=400.0)))
    fold(watching, entries)
    return watching.counts.missing


def weighed(number: int, changes: dict[str, object] | None = None) -> Message:
    document = GOOD | {"n": number, "head": number % 6, "t": NOW + number} | (changes or {})
    return message(document, number, LANE)


def test_heads_that_share_a_counter_miss_nothing() -> None:
    assert missing(weighed(n) for n in range(60)) == 0


def test_a_gap_over_the_topic_counts_as_missing() -> None:
    assert missing(weighed(n) for n in range(60) if n not in (7, 8, 30)) == 3


@pytest.mark.parametrize(
    "changes",
    [{"verdict": "reject"}, {"head": None}, {"net": None}, {"net": 401}, {"t": "soon"}, {"t": 0}],
)
def test_a_number_that_was_set_aside_is_not_missing(changes: dict[str, object]) -> None:
    entries = [weighed(n, changes if 20 < n < 25 else {}) for n in range(60)]
    assert missing(entries) == 0


def test_characteristics_that_share_a_counter_miss_a_number_together() -> None:
    kept, thrown = (replace(SPLIT, use_if=((("ok",), (ok,)),), stream=()) for ok in (True, False))
    watching = engine(
        characteristic(name="kept", source=kept), characteristic(name="thrown", source=thrown)
    )
    fold(watching, [reading(0, n, n, ok=n % 3 > 0) for n in range(30) if n not in (7, 8, 20)])
    assert watching.counts.missing == 3


def test_lanes_count_for_themselves() -> None:
    entries: list[Entry] = []
    for n in range(10):
        entries += [weighed(n), replace(weighed(2 * n), topic="line/2/weight")]
    assert missing(entries) == 9


def test_a_counter_that_wraps_misses_nothing_and_restarts_nothing() -> None:
    source = replace(GAUGE, sequence=SequencePlan(("n",), 4))
    watching = engine(characteristic(source=source))
    outputs = fold(watching, [reading(9, n, n % 4) for n in range(12)])
    assert kinds(events(outputs)) == ["raised"]
    assert watching.counts.missing == 0


def test_a_gap_in_the_counter_alone_abandons_nothing() -> None:
    watching = engine(characteristic(size=2, max_gap=60 * SECOND))
    fold(watching, [reading(0, 0, 0), reading(0, 1, 9)])
    assert (watching.counts.subgroups, watching.counts.abandoned) == (1, 0)
    assert watching.counts.missing == 8


# Gauge restart


def test_after_a_gauge_restart_everything_begins_afresh() -> None:
    plan = characteristic(
        shewhart(RulePlan("outside", width=3.0), RulePlan("run", length=3)),
        CusumPlan("individual", 0.5, 5.0, 0.5),
        shewhart(chart="moving_range"),
        shewhart(chart="moving_range", width=9.0, direction="down"),
    )
    watching = engine(plan)
    before = fold(watching, [reading(v, n, 100 + n) for n, v in enumerate([0, 0, 4, 4.5])])
    assert [(e["event"], e["direction"]) for e in events(before)] == [
        ("raised", "up"),
        ("raised", None),
        ("updated", "up"),
    ]

    restart = watching.fold(reading(1, 10, 0))
    withdrawn = events(restart)
    assert kinds(withdrawn) == ["withdrawn", "withdrawn"]
    assert [e["reason"] for e in withdrawn] == ["gauge-restart"] * 2
    assert [e["id"] for e in withdrawn] == [e["id"] for e in events(before)[:2]]
    assert [e["sequence"] for e in withdrawn] == [4, 5]
    assert [e["time"] for e in withdrawn] == ["2026-03-02T06:41:22.000Z"] * 2
    assert [e["subgroup"] for e in withdrawn] == [None, None]

    (point,) = points(restart)
    assert point.subgroup.number == 5  # numbers go on, what was seen does not
    assert [(r.detector, r.statistic, r.value) for r in point.rows] == [
        ("shewhart", "individual", 1.0),
        ("cusum", "upper_sum", 3.0),  # its start 2.5, and 1 - 0.5
        ("cusum", "lower_sum", 1.0),
    ]
    after = fold(watching, [reading(1, 10 + n, n) for n in (1, 2)])
    assert [row.rules for row in points(after)[-1].rows if row.detector == "shewhart"] == [
        ("run-upper",)  # three since the restart
    ]
    assert kinds(events(after)) == ["raised"]  # and not rejoined


def test_no_onset_lies_before_a_gauge_restart() -> None:
    watching = engine(characteristic())
    fold(watching, [reading(2.5, n, 100 + n) for n in range(50)])
    (event,) = events(fold(watching, [reading(0, 50, 0), reading(9, 51, 1)]))
    assert event["shift"] is not None
    assert event["shift"]["onset"] == event["time"]


def test_a_gauge_restart_abandons_the_partial_subgroup() -> None:
    watching = engine(characteristic(size=3))
    outputs = fold(watching, [reading(1, n, 100 + n) for n in range(2)])
    outputs += fold(watching, [reading(2, 2 + n, n) for n in range(3)])
    assert watching.counts.abandoned == 1
    assert [p.subgroup.values for p in points(outputs)] == [(2.0, 2.0, 2.0)]
    assert points(outputs)[0].subgroup.broken


def test_a_restart_of_one_stream_leaves_the_others_alone() -> None:
    watching = engine(characteristic(source=replace(GAUGE, stream=(("head", ("head",)),))))
    fold(watching, [reading(9, 0, 5, head=1), reading(9, 1, 6, head=2)])
    assert [(e["event"], e["stream"]) for e in events(watching.fold(reading(0, 2, 0, head=1)))] == [
        ("withdrawn", {"head": "1"})
    ]


def test_subgroups_and_their_numbers_are_a_streams_own() -> None:
    watching = engine(characteristic(size=2, source=replace(GAUGE, stream=(("head", ("head",)),))))
    heads = [1, 2, 2, 1, 2, 1, 1, 2]
    outputs = fold(watching, [reading(n, n, n, head=head) for n, head in enumerate(heads)])
    assert [(p.stream, p.subgroup.number, p.subgroup.values) for p in points(outputs)] == [
        ((("head", "2"),), 1, (1.0, 2.0)),
        ((("head", "1"),), 1, (0.0, 3.0)),
        ((("head", "1"),), 2, (5.0, 6.0)),
        ((("head", "2"),), 2, (4.0, 7.0)),
    ]


def test_a_gap_abandons_and_counts() -> None:
    watching = engine(characteristic(size=2, max_gap=30 * SECOND))
    outputs = fold(watching, [reading(1, 0, 0), reading(2, 30.5, 1), reading(3, 60.5, 2)])
    assert [p.subgroup.values for p in points(outputs)] == [(2.0, 3.0)]
    assert watching.counts.abandoned == 1


# Arrival, and what the daemon and the replay rely on


def test_to_a_stream_arrival_never_runs_backwards() -> None:
    source = SourcePlan(topic=TOPIC, captures=(), payload="number")
    watching = engine(characteristic(source=source))
    entries = [message(b"0", 10), message(b"x", 99), message(b"0", 5), message(b"0", 11)]
    outputs = fold(watching, entries)
    assert [p.subgroup.last - START for p in points(outputs)] == [
        10 * SECOND,
        10 * SECOND,
        11 * SECOND,
    ]


def test_lag_is_how_old_the_latest_reading_was() -> None:
    watching = engine(characteristic())
    watching.fold(message({"v": 0, "t": NOW + 1, "n": 1}, 3.5))
    watching.fold(message({"v": 0, "t": NOW + 1, "n": 1}, 9))  # a repeat says nothing
    assert watching.lag == 2.5 * SECOND


@settings(max_examples=40)
@given(good)
def test_equal_entries_give_equal_outputs(good: list[tuple[float, int]]) -> None:
    entries = [usable(second, *each) for second, each in enumerate(good)]
    plan = PLANS["time and sequence"]
    silent = engine(plan, points=False)
    assert fold(engine(plan), entries) == fold(engine(plan), entries)
    assert encoded(fold(silent, entries)) == encoded(fold(engine(plan), entries))
    assert points(fold(silent, entries)) == []


def test_counts_say_what_went_in_and_came_out() -> None:
    watching = engine(characteristic(size=2))
    payloads = [reading(9, n, n) for n in range(4)] + [message(b"{", 9), reading(9, 9, 3)]
    fold(watching, payloads)
    counts = watching.counts
    assert (counts.messages, counts.readings, counts.subgroups) == (6, 5, 2)
    assert (counts.signals, counts.alerts, counts.set_aside) == (2, 1, {"not-json": 1})


def test_a_stream_is_judged_from_when_we_listen_until_we_do_not() -> None:
    watching = engine(characteristic())
    watching.fold(Started(START - 2 * SECOND))
    watching.fold(Connected(START - SECOND, session_present=False))
    watching.fold(reading(9, 0, 0))
    (state,) = watching.streams()
    standing = watching.standing(state)
    assert standing["judging"] == {
        "judging": True,
        "since": "2026-03-02T06:41:12.000Z",
        "why": None,
    }
    assert [(a["rule"], a["since"]) for a in standing["open"]] == [
        ("outside-upper", "2026-03-02T06:41:12.000Z")
    ]
    assert standing["subgroup"] is not None
    assert standing["subgroup"]["number"] == 1

    watching.touched.clear()
    said = watching.mark(state)
    watching.fold(Disconnected(START + 5 * SECOND))
    assert list(watching.touched) == [state]
    assert watching.mark(state) != said
    blind = watching.standing(state)["judging"]
    assert (blind["judging"], blind["since"]) == (False, "2026-03-02T06:41:17.000Z")
    assert blind["why"]

    watching.fold(Connected(START + 9 * SECOND, session_present=True))
    assert watching.standing(state)["judging"]["since"] == "2026-03-02T06:41:21.000Z"
    assert kinds(events(watching.fold(reading(0, 10, 1)))) == []  # nothing was withdrawn
    assert len(watching.standing(state)["open"]) == 1
