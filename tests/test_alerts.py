"""The life of an alert: slots, events, the return test, rejoining, ids and sequence."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace
from hashlib import sha256

import pytest
import rfc8785
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
    shewhart,
)

from monitor import messages
from monitor.entries import Message, Reading
from monitor.messages import AlertEvent
from monitor.outputs import Alert
from monitor.plan import (
    ByDirection,
    CharacteristicPlan,
    CusumPlan,
    EwmaPlan,
    RulePlan,
    Specification,
)
from monitor.times import SECOND, format_time, parse_iso_time

OUTSIDE = shewhart()
CUSUM = CusumPlan("individual", 0.5, 5.0)


def told(plan: CharacteristicPlan, values: Iterable[float]) -> list[AlertEvent]:
    """The events that a reading a second causes."""
    return events(fold(engine(plan, points=False), readings(values)))


def story(alerts: Iterable[AlertEvent]) -> list[tuple[str, str]]:
    return [(alert["event"], alert["rule"]) for alert in alerts]


def second(event: AlertEvent) -> float:
    return (parse_iso_time(event["time"]) - START) / SECOND


# Slots


def test_each_direction_has_one_slot() -> None:
    assert story(told(characteristic(off_delay=99 * SECOND), [4, 4, -4, 4, -4])) == [
        ("raised", "outside-upper"),
        ("raised", "outside-lower"),
    ]


def test_spread_has_a_slot_per_chart_beside_the_directions() -> None:
    plan = characteristic(
        shewhart(chart="range"), shewhart(chart="mean"), size=2, off_delay=99 * SECOND
    )
    alerts = told(plan, [8, 0, 0, -8, 0, 8])
    assert [(e["event"], e["chart"], e["direction"]) for e in alerts] == [
        ("raised", "range", None),
        ("raised", "mean", "up"),
        ("raised", "mean", "down"),
    ]
    assert [e["priority"] for e in alerts] == ["low", "medium", "high"]


def test_two_detectors_share_the_slot_of_their_chart() -> None:
    plan = characteristic(
        shewhart(chart="range"), shewhart(chart="range", width=5.0), size=2, off_delay=99 * SECOND
    )
    assert story(told(plan, [0, 4.5, 0, 9])) == [
        ("raised", "outside-upper"),
        ("updated", "outside-upper"),
    ]


def test_patterns_without_a_side_have_the_slot_of_their_chart() -> None:
    plan = characteristic(
        shewhart(
            RulePlan("alternation", length=4),
            RulePlan("mixture", length=4, width=1.0),
            RulePlan("outside", width=2.5),
        )
    )
    alerts = told(plan, [2, -2, 2, -3])
    assert [(e["event"], e["rule"], e["direction"], e["chart"]) for e in alerts] == [
        ("raised", "alternation", None, "individual"),
        ("raised", "outside-lower", "down", "individual"),
    ]
    assert [s["rule"] for s in alerts[0]["signals"]] == ["alternation", "mixture"]


# Events


def test_several_rules_at_once_are_one_event_named_after_the_first_declared() -> None:
    plan = characteristic(
        CUSUM, shewhart(RulePlan("run", length=1), RulePlan("outside", width=3.0))
    )
    (event,) = told(plan, [6])
    assert (event["event"], event["detector"], event["rule"]) == ("raised", "cusum", "cusum-upper")
    at = "2026-03-02T06:41:12.000Z"
    assert event["signals"] == [
        {"detector": "cusum", "rule": "cusum-upper", "time": at, "count": 1},
        {"detector": "shewhart", "rule": "run-upper", "time": at, "count": 1},
        {"detector": "shewhart", "rule": "outside-upper", "time": at, "count": 1},
    ]


def test_a_further_rule_updates_and_a_repeated_one_is_only_counted() -> None:
    plan = characteristic(OUTSIDE, CUSUM)
    raised, updated = told(plan, [3.5, 3.5, 3.5, 3.5])
    assert (raised["event"], updated["event"]) == ("raised", "updated")
    assert raised["id"] == updated["id"]
    assert (updated["detector"], updated["rule"]) == ("shewhart", "outside-upper")
    assert updated["statistic"]["name"] == "upper_sum"
    assert updated["signals"] == [
        {
            "detector": "shewhart",
            "rule": "outside-upper",
            "time": "2026-03-02T06:41:12.000Z",
            "count": 2,
        },
        {
            "detector": "cusum",
            "rule": "cusum-upper",
            "time": "2026-03-02T06:41:13.000Z",
            "count": 1,
        },
    ]


def test_one_rule_name_of_two_detectors_is_two_signals() -> None:
    plan = characteristic(shewhart(width=3.0), shewhart(width=4.0))
    assert kinds(told(plan, [3.5, 4.5, 3.5, 4.5])) == ["raised", "updated"]


def test_an_event_says_all_there_is_to_say() -> None:
    plan = characteristic(
        shewhart(chart="mean"),
        source=replace(GAUGE, topic="line/+", captures=((1, "lane"),), stream=(("head", ("h",)),)),
        size=2,
        mean=341.0,
        sigma=2.0,
        sigma_between=0.5,
        reaction=("Check fill head {head} of lane {lane}, {not} {head}.",),
        specification=Specification(340.0, None, 352.0),
    )
    entries = [reading(v, n, n, h=4) for n, v in enumerate([341, 340, 349, 348])]
    outputs = fold(engine(plan), [replace(entry, topic="line/1") for entry in entries])
    (event,) = events(outputs)
    reach = 3 * (0.25 + 4 / 2) ** 0.5
    assert event == {
        "schema": 1,
        "id": event["id"],
        "sequence": 1,
        "event": "raised",
        "characteristic": "weight",
        "title": "Net weight, 340 g jar",
        "stream": {"head": "4", "lane": "1"},
        "time": "2026-03-02T06:41:15.000Z",
        "detector": "shewhart",
        "chart": "mean",
        "rule": "outside-upper",
        "direction": "up",
        "priority": "medium",
        "text": event["text"],
        "statistic": {
            "name": "mean",
            "value": 348.5,
            "lower": pytest.approx(341 - reach),
            "upper": pytest.approx(341 + reach),
            "unit": "g",
        },
        "signals": [
            {
                "detector": "shewhart",
                "rule": "outside-upper",
                "time": "2026-03-02T06:41:15.000Z",
                "count": 1,
            }
        ],
        "subgroup": {
            "number": 2,
            "size": 2,
            "mean": 348.5,
            "range": 1.0,
            "sd": pytest.approx(0.5**0.5),
            "first": "2026-03-02T06:41:14.000Z",
            "last": "2026-03-02T06:41:15.000Z",
        },
        "shift": {
            "estimate": pytest.approx(7.5),
            "unit": "g",
            "onset": "2026-03-02T06:41:14.000Z",
            "onset_from": "2026-03-02T06:41:12.000Z",
            "onset_to": "2026-03-02T06:41:14.000Z",
        },
        "specification": {"nominal": 340.0, "lower": None, "upper": 352.0},
        "baseline": {"revision": "revision of the baseline", "mean": 341.0, "sigma": 2.0},
        "reaction": ["Check fill head 4 of lane 1, {not} 4."],
        "caution": event["caution"],
        "reason": None,
    }
    assert "Isolate and lock out before reaching in" in event["caution"]
    assert "not a safety function" in event["caution"]


def test_a_stream_value_in_a_reaction_is_never_a_placeholder() -> None:
    plan = characteristic(
        source=replace(GAUGE, stream=(("a", ("a",)), ("b", ("b",)))), reaction=("{a} {b} {a.x}",)
    )
    (event,) = events(engine(plan).fold(reading(9, 0, 0, a="{b}", b="{0}")))
    assert event["reaction"] == ["{b} {0} {a.x}"]


def test_estimates_are_signed() -> None:
    (event,) = told(characteristic(sigma=2.0), [0, 0, -8])
    assert event["shift"] is not None
    assert event["shift"]["estimate"] == -8.0


# Return to normal


def test_a_large_shift_is_back_after_a_few_subgroups_at_the_baseline() -> None:
    # Estimated 8: the reference is 4, and two at 0 take the test past 5.
    alerts = told(characteristic(), [8, 0, 0, 0])
    assert [(e["event"], second(e)) for e in alerts] == [("raised", 0), ("returned-to-normal", 2)]
    assert alerts[1]["id"] == alerts[0]["id"]


def test_the_smallest_reference_is_half_a_standard_error() -> None:
    # A run of 8 at 0.25: half of that would be 0.125. At 0.5 a subgroup, 5 is passed at the 11th.
    plan = characteristic(shewhart(RulePlan("run", length=8)))
    alerts = told(plan, [0.25] * 8 + [0.0] * 20)
    assert [(e["event"], second(e)) for e in alerts] == [("raised", 7), ("returned-to-normal", 18)]


def test_a_signal_starts_the_return_test_again() -> None:
    plan = characteristic()
    assert kinds(told(plan, [8, 0, 8, 0, 8, 0])) == ["raised"]


@pytest.mark.parametrize("off_delay", [0, 3, 10, 60])
def test_no_return_before_off_delay_since_the_last_signal(off_delay: int) -> None:
    alerts = told(characteristic(off_delay=off_delay * SECOND), [8, 8] + [0] * 100)
    assert [second(e) for e in alerts] == [0, 1 + max(2, off_delay)]


def test_what_was_gathered_before_off_delay_can_be_lost_again() -> None:
    # At the baseline for 8 subgroups, then most of the way up again: no return at off_delay's end.
    plan = characteristic(shewhart(width=7.0), off_delay=10 * SECOND)
    alerts = told(plan, [8] + [0] * 8 + [2] * 6)
    assert [(e["event"], second(e)) for e in alerts] == [("raised", 0), ("returned-to-normal", 10)]
    assert kinds(told(plan, [8] + [0] * 8 + [6] * 6)) == ["raised"]


@pytest.mark.parametrize("settle", [0, 300])
def test_a_shift_still_there_is_hardly_ever_declared_returned(settle: int) -> None:
    """One standard error, 20,000 subgroups: a CUSUM towards the baseline, k 0.5 and h 5, would pass
    its interval once in some 930 of them (one side of 465.4, J. M. Lucas & R. B. Crosier 1982), and
    every signal starts it again. Ten quiet subgroups would have done thousands of times."""
    rng = random.Random(4)
    plan = characteristic(CUSUM, OUTSIDE, off_delay=0)
    shifted = [rng.gauss(0, 1) for _ in range(settle)] + [rng.gauss(1, 1) for _ in range(20_000)]
    alerts = told(plan, shifted)
    returns = [e for e in alerts if e["event"] == "returned-to-normal" and e["direction"] == "up"]
    assert len(returns) <= 20_000 / 930


def test_a_repaired_shift_is_declared_returned_within_some_twenty_subgroups() -> None:
    delay, waited = 10, []
    for seed in range(60):
        rng = random.Random(seed)
        plan = characteristic(CUSUM, off_delay=delay * SECOND)
        quiet = [rng.gauss(0, 1) for _ in range(50)]
        shifted = [rng.gauss(1, 1) for _ in range(60)]
        repaired = [rng.gauss(0, 1) for _ in range(120)]
        alerts = told(plan, quiet + shifted + repaired)
        returned = [e for e in alerts if e["event"] == "returned-to-normal" and second(e) >= 110]
        waited.append(min(second(e) for e in returned if e["direction"] == "up") - 110 - delay)
    waited.sort()
    assert waited[30] <= 10
    assert waited[54] <= 20  # nine in ten


def test_a_spread_returns_after_twice_the_rules_span_without_a_signal() -> None:
    plan = characteristic(shewhart(chart="range"), size=2)
    alerts = told(plan, [0, 9, 0, 0, 0, 9, 0, 0, 0, 0])
    assert [(e["event"], second(e)) for e in alerts] == [("raised", 1), ("returned-to-normal", 9)]


def test_a_pattern_returns_after_twice_its_span_without_a_signal() -> None:
    plan = characteristic(shewhart(RulePlan("alternation", length=4)))
    alerts = told(plan, [0, 1, 0, 1] + [1] * 7 + [2])
    assert [(e["event"], second(e)) for e in alerts] == [("raised", 3), ("returned-to-normal", 11)]


def test_a_fall_may_be_raised_at_the_subgroup_where_a_rise_is_over() -> None:
    # A repair that overdoes it: the return and the new alert come together.
    alerts = told(characteristic(), [0, 5, 0, -5])
    assert [(e["event"], e["direction"], second(e)) for e in alerts] == [
        ("raised", "up", 1),
        ("returned-to-normal", "up", 3),
        ("raised", "down", 3),
    ]
    assert alerts[2]["shift"] is not None
    assert alerts[2]["shift"]["estimate"] == -5.0


def test_a_rise_that_is_over_is_not_the_onset_of_the_next() -> None:
    alerts = told(characteristic(rejoin=0), [0.0] * 9 + [6.0] * 9 + [0.0] * 20 + [3.5])
    assert kinds(alerts) == ["raised", "returned-to-normal", "raised"]
    shift = alerts[2]["shift"]
    assert shift is not None
    assert (shift["estimate"], shift["onset"]) == (3.5, alerts[2]["time"])


def test_a_shift_that_grew_and_is_half_repaired_is_not_over() -> None:
    # From 4 to 12 standard errors; back at 3 a reference of 6 would soon have called it returned.
    assert kinds(told(characteristic(shewhart(width=3.5)), [4, 12, 12, *[3] * 30])) == ["raised"]


# Rejoining


@pytest.mark.parametrize(
    ("quiet", "kind"), [(3, "rejoined"), (62, "rejoined"), (63, "raised"), (200, "raised")]
)
def test_signalling_again_within_rejoin_continues_the_alert(quiet: int, kind: str) -> None:
    # Raised at 0, returned at 2; rejoin is 60 s, its end included.
    alerts = told(characteristic(rejoin=60 * SECOND), [8] + [0] * (quiet - 1) + [8])
    assert kinds(alerts) == ["raised", "returned-to-normal", kind]
    assert (alerts[2]["id"] == alerts[0]["id"]) is (kind == "rejoined")
    assert [e["sequence"] for e in alerts] == [1, 2, 3]


def test_a_rejoined_alert_remembers_its_signals() -> None:
    alerts = told(characteristic(OUTSIDE, shewhart(width=6.0)), [4, 0, 0, 0, 4, 8])
    assert story(alerts) == [
        ("raised", "outside-upper"),
        ("returned-to-normal", "outside-upper"),
        ("rejoined", "outside-upper"),
        ("updated", "outside-upper"),
    ]
    assert [(s["detector"], s["count"]) for s in alerts[-1]["signals"]] == [
        ("shewhart", 3),
        ("shewhart-2", 1),
    ]


def test_a_rejoined_alert_returns_again() -> None:
    alerts = told(characteristic(), [8, 0, 0, 0, 8, 0, 0, 0])
    assert kinds(alerts) == ["raised", "returned-to-normal", "rejoined", "returned-to-normal"]
    assert len({e["id"] for e in alerts}) == 1


def test_what_is_open_stands_in_the_order_it_was_raised() -> None:
    watching = engine(characteristic(rejoin=0, off_delay=5 * SECOND))
    alerts = events(fold(watching, readings([9, 0, 0, 0, 0, 0, -9, 9])))
    assert story(alerts) == [
        ("raised", "outside-upper"),
        ("returned-to-normal", "outside-upper"),
        ("raised", "outside-lower"),
        ("raised", "outside-upper"),
    ]
    (state,) = watching.streams()
    down, up = alerts[2:]
    assert watching.standing(state)["open"] == [
        {
            "id": each["id"],
            "rule": each["rule"],
            "direction": each["direction"],
            "priority": each["priority"],
            "since": each["time"],
            "text": each["text"],
        }
        for each in (down, up)
    ]


# Ids and sequence


def identify(
    plan: CharacteristicPlan, event: AlertEvent, stream: dict[str, str], identity: list[str | None]
) -> str:
    """The contract's id, section 4."""
    (revision,) = {d.revision for d in plan.judgement.detectors if d.name == event["detector"]}
    hashed: list[object] = [
        1,
        plan.name,
        stream,
        event["detector"],
        event["rule"],
        revision,
        identity,
    ]
    return sha256(rfc8785.dumps(hashed)).hexdigest()[:32]  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("time", "sequence", "identity"),
    [
        (("t",), GAUGE.sequence, ["7", f"{START + SECOND}", None, None]),
        (("t",), None, [None, f"{START + SECOND}", None, None]),
        (None, GAUGE.sequence, ["7", None, None, None]),
        (None, None, [None, None, f"{START + SECOND}", "1"]),  # the second of that arrival
    ],
)
def test_an_id_is_the_hash_of_what_the_contract_lists(
    time: tuple[str, ...] | None, sequence: object, identity: list[str | None]
) -> None:
    source = replace(
        GAUGE,
        time=time,
        sequence=sequence,  # type: ignore[arg-type]
        stream=(("lane", ("lane",)), ("head", ("head",))),
    )
    plan = characteristic(source=source)
    entries = [reading(v, 1, n, lane=1, head="ä") for v, n in [(0, 6), (5, 7)]]
    if time and not sequence:
        entries[0] = reading(0, 0, 6, lane=1, head="ä")
    (event,) = events(fold(engine(plan), entries))
    assert event["id"] == identify(plan, event, {"lane": "1", "head": "ä"}, identity)


def test_a_number_beyond_two_to_the_53_has_an_id_of_its_own() -> None:
    ids = [
        events(engine(characteristic()).fold(reading(9, 0, number)))[0]["id"]
        for number in (2**53, 2**53 + 1)
    ]
    assert ids[0] != ids[1]


def test_titles_reactions_priorities_and_delays_change_no_id() -> None:
    plan = characteristic()
    other = replace(
        plan,
        title="Fill weight",
        unit="kg",
        reaction=ByDirection(("Look.",), (), ()),
        priority=ByDirection("high", "high", "high"),
        specification=Specification(1.0, None, None),
        off_delay=SECOND,
    )
    assert told(plan, [9])[0]["id"] == told(other, [9])[0]["id"]


@pytest.mark.parametrize("part", ["name", "detector", "revision", "stream", "reading"])
def test_everything_the_contract_lists_changes_the_id(part: str) -> None:
    plan = characteristic(source=replace(GAUGE, stream=(("head", ("head",)),)))
    first = reading(9, 0, 7, head=1)
    (one,) = events(engine(plan).fold(first))
    judgement = plan.judgement
    detector = judgement.detectors[0]

    def with_detector(**changes: str) -> CharacteristicPlan:
        changed = replace(judgement, detectors=(replace(detector, **changes),))
        return replace(plan, judgement=changed)

    changed = {
        "name": (replace(plan, name="mass"), first),
        "detector": (with_detector(name="x"), first),
        "revision": (with_detector(revision="x"), first),
        "stream": (plan, reading(9, 0, 7, head=2)),
        "reading": (plan, reading(9, 0, 8, head=1)),
    }
    (other,) = events(engine(changed[part][0]).fold(changed[part][1]))
    assert one["id"] != other["id"]


@settings(max_examples=50)
@given(st.lists(st.tuples(st.floats(-5, 5, width=16), st.sampled_from([1, 2])), max_size=60))
def test_sequence_counts_every_event_of_a_stream_without_a_gap(
    given_readings: list[tuple[float, int]],
) -> None:
    plan = characteristic(
        OUTSIDE,
        EwmaPlan("individual", 0.3, 2.0),
        shewhart(chart="moving_range"),
        source=replace(GAUGE, stream=(("head", ("head",)),)),
    )
    entries = [reading(v, n, n % 25, head=h) for n, (v, h) in enumerate(given_readings)]
    alerts = events(fold(engine(plan, points=False), entries))
    for head in ("1", "2"):
        own = [e for e in alerts if e["stream"] == {"head": head}]
        assert [e["sequence"] for e in own] == list(range(1, len(own) + 1))
        assert_life(own)


def assert_life(alerts: list[AlertEvent]) -> None:
    """Every event finds its alert in a state it can follow, and no slot holds two open alerts."""
    state: dict[str, str] = {}
    slots: dict[str, str] = {}
    for event in alerts:
        before = state.get(event["id"])
        slot = event["direction"] or event["chart"]
        match event["event"]:
            case "raised":
                assert before is None
                assert state.get(slots.get(slot, "")) != "open"
                slots[slot] = event["id"]
            case "rejoined":
                assert before == "returned"
            case _:
                assert before == "open"
        ended = {"returned-to-normal": "returned", "withdrawn": "withdrawn"}
        state[event["id"]] = ended.get(event["event"], "open")
        assert (event["reason"] is None) is (event["event"] != "withdrawn")


def test_a_table_and_messages_give_the_same_events() -> None:
    values = [0, 0, 4, 4, 0, 0, 0, -6]
    rows = [Reading(START, "weight", {}, v, START / SECOND + n, n) for n, v in enumerate(values)]
    by_row = fold(engine(characteristic()), [replace(r, time=START + 60 * SECOND) for r in rows])
    by_message = fold(engine(characteristic()), readings(values))
    assert [messages.encode(e) for e in events(by_row)] == [
        messages.encode(e) for e in events(by_message)
    ]


def test_times_of_events_are_event_times() -> None:
    late = Message(
        START + 90 * SECOND, TOPIC, message({"v": 9, "t": START / SECOND, "n": 1}).payload
    )
    (output,) = [o for o in engine(characteristic()).fold(late) if isinstance(o, Alert)]
    assert output.event["time"] == format_time(START)


def test_without_alerts_there_are_only_points() -> None:
    outputs = fold(engine(characteristic()), readings([0, 1, -1]))
    assert (len(points(outputs)), events(outputs)) == (3, [])
