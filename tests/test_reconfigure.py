"""A configuration that changes while readings come: what is decided alike goes on, all else begins
afresh, and what was open of it is withdrawn."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace
from typing import Any

import pytest
from plans import (
    GAUGE,
    START,
    characteristic,
    engine,
    events,
    fold,
    kinds,
    points,
    reading,
    reasons,
    shewhart,
)

from monitor.engine import Engine
from monitor.entries import Configured, Connected, Message, Tick
from monitor.messages import AlertEvent
from monitor.outputs import Gone, Output
from monitor.plan import (
    BaselinePlan,
    ByCount,
    ByDirection,
    ByWindow,
    CharacteristicPlan,
    CusumPlan,
    EwmaPlan,
    Judgement,
    Plan,
    SequencePlan,
)
from monitor.times import SECOND

HEADS = replace(GAUGE, stream=(("head", ("head",)),))
WEIGHT = characteristic(
    shewhart(width=3.0),
    CusumPlan("individual", 0.5, 8.0),
    EwmaPlan("individual", 0.2, 6.0),
    off_delay=3_600 * SECOND,
)


def at(second: float) -> int:
    return START + round(second * SECOND)


def configured(second: float, *plans: CharacteristicPlan) -> Configured:
    return Configured(at(second), Plan(plans))


def judgement(plan: CharacteristicPlan) -> Judgement:
    assert plan.judgement is not None
    return plan.judgement


def with_detector(plan: CharacteristicPlan, index: int, **changes: Any) -> CharacteristicPlan:
    """The same with one detector changed, as its revision tells."""
    old = judgement(plan)
    detectors = list(old.detectors)
    detectors[index] = replace(detectors[index], **{"revision": "another", **changes})
    return replace(plan, judgement=Judgement(old.baseline, tuple(detectors)))


def with_baseline(plan: CharacteristicPlan, mean: float) -> CharacteristicPlan:
    """The same with another baseline, from which every detector's revision follows."""
    detectors = tuple(replace(d, revision=f"{d.name} {mean}") for d in judgement(plan).detectors)
    baseline = BaselinePlan(mean, 1.0, 0.0, f"revision {mean}")
    return replace(plan, judgement=Judgement(baseline, detectors))


def with_all_revisions(plan: CharacteristicPlan, **changes: Any) -> CharacteristicPlan:
    """The same with a change that every decision revision hashes."""
    old = judgement(plan)
    detectors = tuple(replace(d, revision=f"{d.revision}, changed") for d in old.detectors)
    return replace(plan, judgement=Judgement(old.baseline, detectors), **changes)


def started(*plans: CharacteristicPlan) -> Engine:
    begun = engine(*plans)
    begun.fold(Connected(START, True))
    return begun


def rows(outputs: Iterable[Output]) -> dict[str, float]:
    """The statistics at the last subgroup."""
    last = points(outputs)[-1]
    return {f"{row.detector} {row.statistic}": row.value for row in last.rows}


def told(alerts: Iterable[AlertEvent]) -> list[tuple[str, str, str | None]]:
    return [(each["event"], each["rule"], each["reason"]) for each in alerts]


# ── what moves nothing ───────────────────────────────────────────────────────────────────────────

WORDS: dict[str, Any] = {
    "title": "Another title",
    "unit": "kg",
    "priority": ByDirection("high", "high", "high"),
    "reaction": ByDirection(("Do.",), ("Do.",), ("Do.",)),
}


@pytest.mark.parametrize("name", WORDS)
def test_words_move_nothing(name: str) -> None:
    chance = random.Random(1)
    levels = [0.0] * 30 + [2.0] * 30 + [0.0] * 60 + [-2.0] * 30
    entries = [reading(chance.gauss(level, 1.0), n, n) for n, level in enumerate(levels)]
    plan = replace(WEIGHT, off_delay=0, rejoin=5 * SECOND)
    other = replace(plan, **{name: WORDS[name]})
    plain, edited = started(plan), started(plan)
    expected = fold(plain, entries)
    found: list[Output] = []
    for n, entry in enumerate(entries):
        found += edited.fold(entry)
        if n % 7 == 3:
            turned = (other, plan)[n // 7 % 2]
            assert edited.fold(configured(n, turned)) == []
            assert edited.plan == Plan((turned,))
    assert [(p.subgroup, p.rows) for p in points(found)] == [
        (p.subgroup, p.rows) for p in points(expected)
    ]
    bare = [
        [
            {key: value for key, value in event.items() if key not in ("text", *SHOWN)}
            for event in events(outputs)
        ]
        for outputs in (found, expected)
    ]
    assert bare[0] == bare[1]
    assert len(bare[0]) > 4
    assert edited.counts == plain.counts


SHOWN = ("title", "priority", "reaction", "statistic", "shift")


def test_new_words_are_used_at_once() -> None:
    line = started(WEIGHT)
    fold(line, [configured(0, replace(WEIGHT, title="Another, title"))])
    (event, *_) = events(fold(line, [reading(9.0, 0, 0)]))
    assert event["title"] == "Another, title"
    assert event["text"].startswith("Another has risen")


def test_the_same_again_is_nothing() -> None:
    line = started(WEIGHT)
    fold(line, [reading(0.0, 0, 0)])
    before = line.state(), [state.state() for state in line.streams()]
    line.touched.clear()
    assert line.fold(configured(0, WEIGHT)) == []
    after = line.state(), [state.state() for state in line.streams()]
    assert {**after[0], "heard": 0} == {**before[0], "heard": 0}
    assert after[1] == before[1]
    assert not line.touched


# ── a detector ───────────────────────────────────────────────────────────────────────────────────


def test_a_detector_that_changed_begins_afresh_and_the_others_go_on() -> None:
    plain, line = started(WEIGHT), started(WEIGHT)
    entries = [reading(1.0, n, n) for n in range(10)]
    fold(plain, entries)
    fold(line, [*entries, configured(9, with_detector(WEIGHT, 1))])
    next_ = [reading(1.0, 10, 10)]
    expected, found = rows(fold(plain, next_)), rows(fold(line, next_))
    assert found.pop("cusum upper_sum") == 0.5
    assert expected.pop("cusum upper_sum") == 5.5
    assert found == expected


def test_its_alert_is_withdrawn_and_no_other() -> None:
    line = started(WEIGHT)
    up = events(fold(line, [reading(9.0, 0, 0)]))
    down = events(fold(line, [reading(-1.5, n, n) for n in range(1, 30)]))
    assert told(up)[0] == ("raised", "outside-upper", None)
    assert told(down)[0] == ("raised", "cusum-lower", None)
    (event,) = events(line.fold(configured(30, with_detector(WEIGHT, 1))))
    assert told([event]) == [("withdrawn", "cusum-lower", "configuration")]
    assert (event["id"], event["subgroup"]) == (down[0]["id"], None)
    assert event["time"] == "2026-03-02T06:41:42.000Z"
    assert event["sequence"] == max(e["sequence"] for e in (*up, *down)) + 1
    (state,) = line.streams()
    assert [each["rule"] for each in line.standing(state)["open"]] == ["outside-upper"]


@pytest.mark.parametrize("change", ["removed", "renamed", "changed"])
def test_what_it_raised_is_withdrawn_however_it_goes(change: str) -> None:
    line = started(WEIGHT)
    fold(line, [reading(9.0, 0, 0)])
    old = judgement(WEIGHT)
    other = {
        "removed": replace(WEIGHT, judgement=Judgement(old.baseline, old.detectors[1:])),
        "renamed": with_detector(WEIGHT, 0, name="another", revision=old.detectors[0].revision),
        "changed": with_detector(WEIGHT, 0),
    }[change]
    assert told(events(line.fold(configured(1, other)))) == [
        ("withdrawn", "outside-upper", "configuration")
    ]
    assert line.counts.alerts == 2


def test_what_had_returned_does_not_rejoin_under_another_detector() -> None:
    plan = replace(WEIGHT, off_delay=0, rejoin=3_600 * SECOND)
    line = started(plan)
    first = events(fold(line, [reading(9.0, 0, 0), reading(-9.0, 1, 1), reading(0.0, 2, 2)]))
    assert ("returned-to-normal", "outside-upper", None) in told(first)
    fold(line, [configured(3, with_detector(plan, 0))])
    again = events(fold(line, [reading(9.0, 4, 4)]))
    assert told(again)[-1] == ("raised", "outside-upper", None)
    assert again[-1]["id"] not in {event["id"] for event in first}


def test_a_solved_constant_moves_what_goes_on_alike_live_and_after_a_start() -> None:
    # As a later version may solve it otherwise: what is declared is the same, and so the revision.
    old = judgement(WEIGHT).detectors[1]
    other = with_detector(
        WEIGHT, 1, scheme=CusumPlan("individual", 0.5, 4.0), revision=old.revision
    )
    line = started(WEIGHT)
    fold(line, [*(reading(1.0, n, n) for n in range(6)), configured(6, other)])
    again = engine(other)
    again.restore(line.state(), [state.state() for state in line.streams()])
    for each in (line, again):
        told_now = events(fold(each, [reading(2.0, 7, 7)]))
        assert told(told_now) == [("raised", "cusum-upper", None)]
        assert told_now[0]["statistic"]["value"] == 4.5  # type: ignore[index]


# ── the baseline, and whether there is one ───────────────────────────────────────────────────────


def test_with_another_baseline_all_begin_afresh() -> None:
    line, fresh = started(WEIGHT), started(with_baseline(WEIGHT, 1.0))
    fold(line, [reading(1.5, n, n) for n in range(9)])
    told_now = events(line.fold(configured(9, with_baseline(WEIGHT, 1.0))))
    assert {e[0] for e in told(told_now)} == {"withdrawn"}
    assert told_now[0]["baseline"] is not None
    next_ = [reading(2.0, 9, 9)]
    found, expected = fold(line, next_), fold(fresh, next_)
    assert rows(found) == rows(expected)
    assert points(found)[0].subgroup.number == 10, "numbers go on"


def test_the_look_back_begins_afresh_with_it() -> None:
    line = started(WEIGHT)
    fold(line, [reading(2.0, n, n) for n in range(3)])
    line.fold(configured(3, with_baseline(WEIGHT, 2.0)))
    (event, *_) = events(fold(line, [reading(9.0, 4, 4)]))
    assert event["shift"] is not None
    assert event["shift"]["onset"] == "2026-03-02T06:41:16.000Z"


def test_a_stream_may_lose_its_baseline_and_find_one_again() -> None:
    line = started(WEIGHT)
    (raised, *_) = events(fold(line, [reading(9.0, 0, 0)]))
    bare = replace(WEIGHT, judgement=None)
    (withdrawn,) = events(line.fold(configured(1, bare)))
    assert (withdrawn["event"], withdrawn["id"]) == ("withdrawn", raised["id"])
    outputs = fold(line, [reading(9.0, 2, 1)])
    assert events(outputs) == []
    assert points(outputs)[0].rows == ()
    (state,) = line.streams()
    assert line.standing(state)["judging"]["why"] == "no baseline"
    assert events(line.fold(configured(3, WEIGHT))) == []
    (again, *_) = events(fold(line, [reading(9.0, 4, 2)]))
    assert (again["event"], again["sequence"]) == ("raised", withdrawn["sequence"] + 1)


def test_of_streams_with_baselines_of_their_own_only_what_changed_begins_afresh() -> None:
    plan = replace(WEIGHT, source=HEADS)
    own = with_baseline(plan, 1.0)
    line = started(plan)
    fold(line, [reading(1.0, n, n, head=n % 2) for n in range(8)])
    line.fold(configured(8, replace(plan, by_stream={(("head", "1"),): judgement(own)})))
    found = {
        head: rows(fold(line, [reading(1.0, 8 + head, 8 + head, head=head)]))["cusum upper_sum"]
        for head in (0, 1)
    }
    assert found == {0: 2.5, 1: 0.0}


# ── how readings are taken and gathered ──────────────────────────────────────────────────────────


@pytest.mark.parametrize(
    ("change", "abandoned", "subgroups"),
    [
        ({"subgroup": ByCount(4)}, 1, 2),
        ({"subgroup": ByWindow(60 * SECOND)}, 1, 1),
        ({"source": replace(GAUGE, plausible_upper=1e6)}, 1, 2),
        ({"title": "Another"}, 0, 3),
    ],
    ids=["size", "window", "source", "title"],
)
def test_what_was_gathered_otherwise_is_given_up(
    change: dict[str, Any], abandoned: int, subgroups: int
) -> None:
    plan = replace(WEIGHT, subgroup=ByCount(3))
    line = started(plan)
    fold(line, [reading(1.0, n, n) for n in range(5)])
    line.fold(configured(5, with_all_revisions(plan, **change)))
    assert line.counts.abandoned == abandoned
    (state,) = line.streams()
    assert state.gatherer.number == 1, "numbers go on"
    fold(line, [reading(1.0, 61 + n, 5 + n) for n in range(4)])
    assert line.counts.subgroups == subgroups


def test_a_shift_of_another_source_is_no_onset() -> None:
    line = started(WEIGHT)
    fold(line, [reading(2.0, n, n) for n in range(3)])
    source = replace(GAUGE, plausible_upper=1e6)
    line.fold(configured(3, with_all_revisions(WEIGHT, source=source)))
    (event, *_) = events(fold(line, [reading(9.0, 4, 4)]))
    assert event["shift"] is not None
    assert event["shift"]["onset"] == "2026-03-02T06:41:16.000Z"


def test_no_window_closes_that_is_no_more() -> None:
    plan = replace(WEIGHT, subgroup=ByWindow(10 * SECOND))
    line = started(plan)
    fold(line, [reading(0.0, 0, 0)])
    assert line.next_deadline() is not None
    line.fold(configured(1, with_all_revisions(plan, subgroup=ByCount(1))))
    assert line.state()["deadlines"]["due"] == []
    assert fold(line, [Tick(at(100))]) == []
    for other in (replace(plan, title="Another"), plan):
        line = started(plan)
        fold(line, [reading(0.0, 0, 0), configured(1, other)])
        assert len(points(fold(line, [Tick(at(100))]))) == 1, "one that goes on does"


def test_another_counter_is_not_the_old_one() -> None:
    line = started(replace(WEIGHT, subgroup=ByCount(2)))
    fold(line, [reading(0.0, n, 100 + n) for n in range(2)])
    wraps = replace(GAUGE, sequence=SequencePlan(("n",), 1_000))
    line.fold(configured(3, with_all_revisions(WEIGHT, source=wraps, subgroup=ByCount(2))))
    outputs = fold(line, [reading(0.0, 4, 999), reading(0.0, 5, 0)])
    assert (reasons(outputs), len(points(outputs))) == ([], 1)
    assert line.counts.abandoned == 0, "the gauge did not start again"


def test_what_was_seen_is_not_taken_again() -> None:
    line = started(WEIGHT)
    fold(line, [reading(0.0, n, n) for n in range(3)])
    line.fold(configured(3, with_baseline(WEIGHT, 1.0)))
    assert reasons(fold(line, [reading(0.0, 2, 2)])) == ["repeated"]


def test_topics_are_read_as_configured_now() -> None:
    line = started(WEIGHT)
    other = replace(GAUGE, topic="line/other")
    line.fold(configured(0, with_all_revisions(WEIGHT, source=other)))
    on_old = reading(0.0, 1, 1)
    on_new = Message(on_old.time, "line/other", on_old.payload)
    assert reasons(line.fold(on_old)) == ["no-topic"]
    assert len(points(line.fold(on_new))) == 1


# ── what comes and goes ──────────────────────────────────────────────────────────────────────────


def test_a_characteristic_that_leaves_takes_its_streams_along() -> None:
    heads, torque = replace(WEIGHT, source=HEADS), replace(WEIGHT, name="torque")
    line = started(heads, torque)
    raised = events(fold(line, [reading(9.0, n, n, head=n) for n in range(2)]))
    outputs = line.fold(configured(2, torque))
    withdrawn = events(outputs)
    assert {e["event"] for e in withdrawn} == {"withdrawn"}
    ended = {event["id"] for event in withdrawn}
    assert ended == {e["id"] for e in raised if e["characteristic"] == "weight"}
    gone = [output for output in outputs if isinstance(output, Gone)]
    assert gone == [Gone("weight", (("head", "0"),)), Gone("weight", (("head", "1"),))]
    assert [state.plan.name for state in line.streams()] == ["torque"]
    assert not line.changed.keys() - set(line.streams())
    assert not line.touched.keys() - set(line.streams())
    assert line.counts.alerts == len(raised) + 2


def test_one_that_comes_begins_with_nothing() -> None:
    line = started(WEIGHT)
    fold(line, [reading(1.0, n, n) for n in range(5)])
    torque = replace(WEIGHT, name="torque")
    assert line.fold(configured(5, WEIGHT, torque)) == []
    outputs = fold(line, [reading(1.0, 5, 5)])
    by_name = {p.characteristic.name: p.subgroup.number for p in points(outputs)}
    assert by_name == {"weight": 6, "torque": 1}


def test_with_other_keys_all_streams_are_others() -> None:
    plan = replace(WEIGHT, source=HEADS)
    line = started(WEIGHT)
    (raised, *_) = events(fold(line, [reading(9.0, 0, 0, head=3)]))
    outputs = line.fold(configured(1, with_all_revisions(WEIGHT, source=HEADS)))
    assert [(e["event"], e["id"]) for e in events(outputs)] == [("withdrawn", raised["id"])]
    assert [output for output in outputs if isinstance(output, Gone)] == [Gone("weight", ())]
    assert line.streams() == []
    (again, *_) = events(fold(line, [reading(9.0, 2, 1, head=3)]))
    assert (again["stream"], again["sequence"]) == ({"head": "3"}, 1)
    assert kinds(events(line.fold(configured(3, plan)))) == ["withdrawn"]


@pytest.mark.parametrize("detector", range(3))
def test_live_and_after_a_start_it_is_the_same(detector: int) -> None:
    # A start notes the configuration as a change does: between the two nothing comes.
    chance = random.Random(detector)
    entries = [reading(chance.gauss(n % 40 / 15, 1.0), n, n) for n in range(200)]
    other = with_detector(replace(WEIGHT, title="Another"), detector)
    line = started(WEIGHT)
    expected = fold(line, [*entries[:100], configured(99, other), *entries[100:]])
    first = started(WEIGHT)
    found = fold(first, entries[:100])
    again = engine(WEIGHT)
    again.restore(first.state(), [state.state() for state in first.streams()])
    found += fold(again, [configured(99, other), *entries[100:]])
    assert found == expected
    assert found != fold(started(WEIGHT), entries)


def test_a_detector_plan_of_an_open_alert_is_the_new_one() -> None:
    line = started(WEIGHT)
    fold(line, [reading(9.0, 0, 0)])
    line.fold(configured(1, replace(WEIGHT, title="Another")))
    again = engine(replace(WEIGHT, title="Another"))
    again.restore(line.state(), [state.state() for state in line.streams()])
    entries = [reading(-9.0, n, n) for n in range(2, 9)]
    assert fold(line, entries) == fold(again, entries)
