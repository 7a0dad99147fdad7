"""The engine's state: whoever restores it folds on as if nothing had happened.

Several characteristics read the same messages, so that one stream of entries goes through every way
of gathering, every detector and every rule.
"""

from __future__ import annotations

import random
from collections.abc import Iterable, Sequence
from dataclasses import replace
from typing import Any, NamedTuple

import orjson
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import GAUGE, START, TOPIC, characteristic, engine, events, reading, readings, shewhart

from monitor import messages, routes
from monitor.engine import Engine
from monitor.entries import Connected, Disconnected, Entry, Message, Reading, Started, Tick
from monitor.outputs import Alert, Output
from monitor.plan import (
    BaselinePlan,
    ByCount,
    ByWindow,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    Judgement,
    RulePlan,
    Scheme,
    SequencePlan,
    SourcePlan,
    SubgroupPlan,
)
from monitor.stream import StreamState
from monitor.times import SECOND

HEADS = replace(GAUGE, stream=(("head", ("head",)),), plausible_upper=50.0)


def all_rules(chart: Chart) -> Scheme:
    return shewhart(
        RulePlan("outside", width=2.0),
        RulePlan("zone", count=2, of=3, width=1.0),
        RulePlan("run", length=4),
        RulePlan("trend", length=3),
        RulePlan("alternation", length=4),
        RulePlan("stratification", length=3, width=1.0),
        RulePlan("mixture", length=3, width=1.0),
        chart=chart,
    )


def judged(
    name: str, *schemes: Scheme, subgroup: SubgroupPlan, source: SourcePlan = HEADS
) -> CharacteristicPlan:
    plan = characteristic(
        *schemes,
        name=name,
        source=source,
        sigma_between=0.25,
        off_delay=3 * SECOND,
        rejoin=15 * SECOND,
        reaction=("Look at head {head}.",),
    )
    return replace(plan, subgroup=subgroup)


def own(head: str, mean: float, scheme: Scheme) -> dict[tuple[tuple[str, str], ...], Judgement]:
    baseline = BaselinePlan(mean, 0.5, 0.0, f"revision of {head}")
    detector = DetectorPlan("own", "any", scheme, f"revision of the detector of {head}")
    return {(("head", head),): Judgement(baseline, (detector,))}


PLANS = (
    judged(
        "pairs",
        all_rules("mean"),
        CusumPlan("mean", 0.25, 2.0, 0.5),
        EwmaPlan("mean", 0.3, 1.5),
        shewhart(chart="range", width=1.0),
        shewhart(chart="sd", width=1.0),
        shewhart(chart="variance", width=1.5),
        CusumPlan("variance", 1.5, 2.0, 0.5, k_lower=0.6, h_lower=1.0, size=2),
        all_rules("median"),
        subgroup=ByCount(2, 20 * SECOND),
    ),
    judged(
        "singles",
        all_rules("individual"),
        CusumPlan("individual", 0.5, 3.0, hold=True, clip=2.0),
        EwmaPlan("individual", 0.2, 2.0, hold=True, asymptotic=True),
        shewhart(chart="moving_range", width=1.5),
        subgroup=ByCount(1, 20 * SECOND),
        source=replace(HEADS, sequence=SequencePlan(("w",), 16)),
    ),
    judged(
        "windows",
        all_rules("mean"),
        CusumPlan("mean", 0.25, 2.0),
        EwmaPlan("mean", 0.3, 1.5),
        CusumPlan("variance", 1.3, 2.0, direction="up", hold=True, size=3),
        subgroup=ByWindow(6 * SECOND, 2),
        source=replace(HEADS, sequence=None),
    ),
    judged(
        "samples",
        shewhart(chart="moving_range", width=1.0),
        subgroup=ByCount(1, 12 * SECOND, 7 * SECOND),
        source=replace(HEADS, time=None),
    ),
    replace(
        judged("own", subgroup=ByCount(3), source=replace(HEADS, time=None, sequence=None)),
        judgement=None,
        by_stream=own("1", 1.0, CusumPlan("mean", 0.5, 2.0)) | own("2", -1.0, all_rules("mean")),
    ),
)


class Step(NamedTuple):
    """An entry to be; ``number`` is how far the counter goes on, or None where it starts again."""

    kind: str
    passed: int = 1
    value: float = 0.0
    head: int = 1
    number: int | None = 1
    lag: int = 0


def entries_of(steps: Sequence[Step]) -> list[Entry]:
    now, number = 0, 100
    made: list[Entry] = []
    for step in steps:
        now += step.passed
        time = START + now * SECOND
        match step.kind:
            case "reading":
                number = 0 if step.number is None else max(0, number + step.number)
                made.append(
                    replace(
                        reading(step.value, now - step.lag, number, head=step.head, w=number % 16),
                        time=time,
                    )
                )
            case "row":
                at = START / SECOND + now
                made.append(Reading(time, "pairs", {"head": str(step.head)}, step.value, at))
            case "noise":
                made.append(Message(time, TOPIC, b"{"))
            case "tick":
                made.append(Tick(time))
            case "started":
                made.append(Started(time))
            case "disconnected":
                made.append(Disconnected(time))
            case "connected" | "session lost":
                made.append(Connected(time, session_present=step.kind == "connected"))
    return made


def snapshot(watching: Engine) -> bytes:
    """The state as it lies on disk."""
    return orjson.dumps([watching.state(), [each.state() for each in watching.streams()]])


def restored(state: bytes, plans: Sequence[CharacteristicPlan] = PLANS) -> Engine:
    whole, streams = orjson.loads(state)
    again = engine(*plans)
    again.restore(whole, streams)
    return again


def plain(outputs: Sequence[Output]) -> list[object]:
    """Outputs as they are seen from outside: an alert by its bytes."""
    return [(messages.encode(o.event), o.evidence) if isinstance(o, Alert) else o for o in outputs]


def names(streams: Iterable[StreamState]) -> list[object]:
    return [(state.plan.name, state.stream) for state in streams]


def shown(watching: Engine) -> list[object]:
    """What else anyone can see of an engine."""
    standings = [watching.standing(state) for state in watching.streams()]
    marks = [watching.mark(state) for state in watching.streams()]
    return [standings, marks, watching.counts, watching.lag]


values = st.floats(-3, 3, width=16) | st.sampled_from([0.0, 1.2, 1.2, 2.5, 2.5, -2.5, 6.0, 99.0])
steps = st.lists(
    st.one_of(
        st.builds(
            Step,
            st.just("reading"),
            st.sampled_from([0, 1, 1, 1, 2, 5, 25]),
            values,
            st.integers(1, 3),
            st.sampled_from([1, 1, 1, 1, 2, 5, 0, -3, None]),
            st.sampled_from([0, 0, 0, 1, 8]),
        ),
        st.sampled_from([0.1, 1.2, 2.5, -2.5]).map(lambda value: Step("reading", value=value)),
        st.sampled_from(
            ["tick", "row", "noise", "connected", "session lost", "disconnected", "started"]
        ).map(Step),
    ),
    max_size=40,
)


@settings(max_examples=250, deadline=None)
@given(steps, st.sampled_from([PLANS, *((plan,) for plan in PLANS)]), st.data())
def test_a_restored_engine_folds_on_as_the_other(
    steps: list[Step], plans: Sequence[CharacteristicPlan], data: st.DataObject
) -> None:
    entries = entries_of(steps)
    at = data.draw(st.integers(0, len(entries)))
    kept = engine(*plans)
    for entry in entries[:at]:
        kept.fold(entry)
    again = restored(snapshot(kept), plans)
    assert snapshot(again) == snapshot(kept)
    assert shown(again) == shown(kept)
    for entry in entries[at:]:
        for each in (kept, again):
            each.touched.clear()
            each.changed.clear()
        assert plain(again.fold(entry)) == plain(kept.fold(entry))
        assert names(again.touched) == names(kept.touched)
        assert names(again.changed) == names(kept.changed)
    assert snapshot(again) == snapshot(kept)
    assert shown(again) == shown(kept)


@settings(max_examples=150, deadline=None)
@given(steps)
def test_so_does_one_that_is_restored_after_every_entry(steps: list[Step]) -> None:
    kept = again = engine(*PLANS)
    for entry in entries_of(steps):
        state = snapshot(kept)
        again = restored(state)
        assert snapshot(again) == state
        assert plain(again.fold(entry)) == plain(kept.fold(entry))
    assert snapshot(again) == snapshot(kept)


def season(count: int) -> list[Entry]:
    """A long run that comes through everything: drifts both ways, repairs, outages, restarts."""
    chance = random.Random(7)
    steps: list[Step] = []
    for place in range(count):
        drift = (0.0, 0.0, 1.8, 0.0, -1.8, 0.0)[place // 60 % 6]
        number: int | None = 1 if chance.random() < 0.95 else chance.choice([0, -2, 3])
        if place % 331 == 330:
            number = None
        lag = 0 if chance.random() < 0.95 else 4
        value = round(chance.gauss(drift, 1.0), 2)
        steps.append(Step("reading", 1, value, place % 3 + 1, number, lag))
        if place % 97 == 50:
            steps.append(Step("tick", 9))
        if place % 151 == 100:
            steps += [Step("disconnected"), Step("connected", 40)]
        if place % 227 == 200:
            steps += [Step("started", 3), Step("session lost", 5), Step("noise")]
    return entries_of(steps)


def test_a_long_run_goes_on_from_anywhere() -> None:
    entries = season(1_500)
    kept = engine(*PLANS)
    outputs: list[list[object]] = []
    states: list[bytes] = []
    told: list[Output] = []
    for entry in entries:
        states.append(snapshot(kept) if len(states) % 125 == 37 else b"")
        made = kept.fold(entry)
        told += made
        outputs.append(plain(made))
    seen = {(e["event"], e["reason"] is not None) for e in events(told)}
    assert seen == {
        ("raised", False),
        ("updated", False),
        ("returned-to-normal", False),
        ("rejoined", False),
        ("withdrawn", True),
    }
    assert min(state.last.number for state in kept.streams() if state.last) > 30
    assert kept.counts.missing
    assert kept.counts.abandoned
    assert {"late", "repeated", "not-json"} <= kept.counts.set_aside.keys()
    ringing = 0
    for at, state in enumerate(states):
        if state:
            again = restored(state)
            ringing += sum(bool(s.alerts and s.alerts.open()) for s in again.streams())
            assert [plain(again.fold(entry)) for entry in entries[at:]] == outputs[at:]
            assert snapshot(again) == snapshot(kept)
            assert shown(again) == shown(kept)
    assert ringing > 10


def test_a_full_look_back_goes_on_as_well() -> None:
    plan = characteristic(CusumPlan("individual", 0.5, 8.0))
    entries = readings([0.0] * 230 + [1.0] * 40)
    kept = engine(plan)
    state = b""
    for at, entry in enumerate(entries):
        if at == 225:
            state = snapshot(kept)
        kept.fold(entry)
    again = restored(state, [plan])
    raised = events([output for entry in entries[225:] for output in again.fold(entry)])
    assert raised[0]["shift"] is not None
    assert raised[0]["shift"]["onset"] == "2026-03-02T06:45:02.000Z"
    assert snapshot(again) == snapshot(kept)


def test_counters_of_more_topics_than_are_kept_are_forgotten_at_the_same_message(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(routes, "_MAX_TOPICS", 5)
    source = replace(GAUGE, topic="line/+", captures=((1, "lane"),))
    plan = characteristic(source=source)
    order = [0, 1, 2, 3, 4, 0, 1, 4, 5, 0, 1, 2, 3, 0, 6, 4, 4, 5, 2, 7, 1, 0]
    entries = [
        replace(reading(0.0, n, 10 * n), topic=f"line/{topic}") for n, topic in enumerate(order)
    ]
    kept, expected = engine(plan), b""
    for at, entry in enumerate(entries):
        again = restored(snapshot(kept), [plan])
        for later in entries[at:]:
            again.fold(later)
        assert expected in (b"", snapshot(again))
        expected = snapshot(again)
        kept.fold(entry)
        assert len(kept.state()["counters"]) <= 5
    assert snapshot(kept) == expected
    assert kept.counts.missing > 0


def test_a_state_is_not_changed_by_what_comes_later() -> None:
    kept = engine(*PLANS)
    entries = season(60)
    for entry in entries[:50]:
        kept.fold(entry)
    for present in (True, False):  # the session was there and is not: an alert of each gauge
        kept.fold(Connected(entries[50].time, session_present=present))
    state = [kept.state(), [each.state() for each in kept.streams()]]
    before = orjson.dumps(state)
    for entry in entries[50:]:
        kept.fold(entry)
    assert orjson.dumps(state) == before


def test_a_restored_engine_does_not_share_what_it_was_given() -> None:
    kept = engine(*PLANS)
    entries = season(60)
    for entry in entries[:50]:
        kept.fold(entry)
    whole, streams = orjson.loads(snapshot(kept))
    before = orjson.dumps([whole, streams])
    again = engine(*PLANS)
    again.restore(whole, streams)
    for entry in entries[50:]:
        again.fold(entry)
    assert orjson.dumps([whole, streams]) == before


@pytest.mark.parametrize("version", [0, 1, "2", None])
def test_a_state_of_another_version_is_refused(version: object) -> None:
    state: dict[str, Any] = engine(*PLANS).state() | {"version": version}
    with pytest.raises(ValueError, match="version"):
        engine(*PLANS).restore(state, [])


def test_a_state_without_a_version_is_refused() -> None:
    with pytest.raises(ValueError, match="version"):
        engine(*PLANS).restore({}, [])
