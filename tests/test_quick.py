"""The quick way gives what the long way gives, whatever comes."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import orjson
import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import GAUGE, START, characteristic, shewhart

from monitor.engine import Engine
from monitor.entries import Connected, Disconnected, Entry, Message, Parsed, Tick
from monitor.outputs import Alert, Output
from monitor.plan import CharacteristicPlan, CusumPlan, Plan, SequencePlan
from monitor.times import SECOND, format_time

SOURCE = replace(
    GAUGE,
    stream=(("head", ("head",)),),
    use_if=((("ok",), ("yes", True)),),
    plausible_lower=-50.0,
    plausible_upper=50.0,
)
odd = st.sampled_from(
    [None, True, False, 1, 1.0, "1", "x", 1e308, float("nan"), [], {}, -(10**30), "2026-03-02"]
)
times = (
    st.integers(-5, 400).map(lambda n: START / SECOND + n / 7)
    | st.integers(-5, 400).map(lambda n: format_time(START + n * 137_000))
    | odd
)
documents = st.fixed_dictionaries(
    {},
    optional={
        "v": st.floats(-60, 60) | st.integers(-60, 60) | odd,
        "t": times,
        "n": st.integers(0, 60) | odd,
        "head": st.integers(1, 2) | odd,
        "ok": st.sampled_from(["yes", "yes", "yes", True, "no", 1, None]),
    },
)


@st.composite
def streams(draw: st.DrawFn) -> list[Entry]:
    """Mostly readings in order, among them whatever a gauge could send, ticks and outages."""
    entries: list[Entry] = []
    for n in range(draw(st.integers(0, 120))):
        now = START + n * 150_000
        kind = draw(st.integers(0, 24))
        usual: dict[str, Any] = {
            "v": draw(st.floats(-4, 4)),
            "t": now / SECOND if n % 3 else format_time(now),
            "n": n,
            "head": 1 + n % 2,
            "ok": "yes",
        }
        if kind == 0:
            entries.append(Tick(now))
        elif kind == 1:
            entries += [Disconnected(now), Connected(now, draw(st.booleans()))]
        elif kind < 6:
            usual |= draw(documents)
            for name in draw(st.sets(st.sampled_from(sorted(usual)), max_size=1)):
                del usual[name]
            entries.append(Parsed(now, "line/gauge", usual))
        else:
            entries.append(Parsed(now, "line/gauge", usual))
    return entries


def shown(output: Output) -> object:
    return orjson.dumps(output.event) if isinstance(output, Alert) else output


def fold(plan: Plan, entries: list[Entry]) -> tuple[list[object], object, object]:
    """Outputs, the engine's state and its streams'."""
    engine = Engine(plan, points=True)
    outputs = [shown(each) for entry in entries for each in engine.fold(entry)]
    return outputs, engine.state(), [state.state() for state in engine.streams()]


PLANS = {
    "subgroups": characteristic(
        shewhart(chart="mean", width=2.0),
        CusumPlan("mean", 0.5, 3.0),
        CusumPlan("variance", 1.5, 2.0, k_lower=0.6, h_lower=1.0, size=3),
        source=SOURCE,
        size=3,
        max_gap=2 * SECOND,
    ),
    "singles": characteristic(shewhart(chart="moving_range"), source=SOURCE, size=1),
    "wraps": characteristic(
        shewhart(chart="mean"),
        source=replace(SOURCE, sequence=SequencePlan(("n",), 16), use_if=()),
        size=2,
    ),
    "one stream": characteristic(source=replace(SOURCE, stream=(), use_if=()), size=4),
}


@pytest.mark.parametrize("plan", PLANS.values(), ids=PLANS)
@given(entries=streams())
def test_quick_and_long_agree(plan: CharacteristicPlan, entries: list[Entry]) -> None:
    quickly = fold(Plan((plan,)), entries)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("monitor.engine.quick", lambda *_: None)
        assert fold(Plan((plan,)), entries) == quickly


def test_the_usual_goes_the_quick_way(monkeypatch: pytest.MonkeyPatch) -> None:
    engine = Engine(Plan((PLANS["subgroups"],)), points=False)
    usual = [
        {"v": 0.5, "t": START / SECOND + n / 10, "n": n, "head": 1, "ok": "yes"} for n in range(30)
    ]
    entries = [
        Message(START + n * SECOND, "line/gauge", orjson.dumps(d)) for n, d in enumerate(usual)
    ]
    for entry in entries[:2]:
        engine.fold(entry)

    def never(*_: object) -> None:
        raise AssertionError("the long way")

    monkeypatch.setattr(Engine, "_read", never)
    for entry in entries[2:]:
        engine.fold(entry)
    assert engine.counts.readings == 30


@pytest.mark.parametrize(
    "change",
    [{"time": None}, {"sequence": None}, {"value": ("a", "b")}, {"use_if": ((("a", "b"), (1,)),)}],
)
def test_an_unusual_source_has_no_quick_way(change: dict[str, Any]) -> None:
    engine = Engine(Plan((characteristic(source=replace(SOURCE, **change)),)), points=False)
    engine.fold(Parsed(START, "line/gauge", {}))
    assert [route.quick for route in engine._routes.find("line/gauge")] == [None]
    assert engine.counts.messages == 1
