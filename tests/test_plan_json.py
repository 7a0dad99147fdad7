"""Plans as JSON and back."""

from __future__ import annotations

import json
import types
import typing
from dataclasses import fields, is_dataclass
from pathlib import Path
from typing import Any

import pytest
import yaml
from daemons import CONFIGURATION
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor import plan as plans
from monitor import plan_json
from monitor.configuration.resolve import read_settings
from monitor.plan import CharacteristicPlan, Plan, Stream


def made(annotation: Any) -> st.SearchStrategy[Any]:
    """Any value of a type that a plan is made of."""
    origin, inner = typing.get_origin(annotation), typing.get_args(annotation)
    if is_dataclass(annotation) or is_dataclass(origin):
        kind: Any = origin or annotation
        variables = dict(zip(getattr(kind, "__parameters__", ()), inner, strict=False))
        hints = typing.get_type_hints(kind)
        parts = {f.name: made(variables.get(hints[f.name], hints[f.name])) for f in fields(kind)}
        return st.builds(kind, **parts)
    if origin in (typing.Union, types.UnionType):
        return st.one_of(*map(made, inner))
    if origin is typing.Literal:
        return st.sampled_from(inner)
    if origin is tuple and inner[1:] == (...,):
        return st.lists(made(inner[0]), max_size=2).map(tuple)
    if origin is tuple:
        return st.tuples(*map(made, inner))
    if origin is not None:  # a mapping
        return st.dictionaries(*map(made, inner), max_size=3)
    return SIMPLE[annotation]


SIMPLE: dict[Any, st.SearchStrategy[Any]] = {
    int: st.integers(-(2**63), 2**63 - 1),
    float: st.floats(allow_nan=False, allow_infinity=False),
    str: st.text(st.characters(exclude_categories=["Cs"]), max_size=5),
    bool: st.booleans(),
    object: st.text(max_size=3) | st.integers(0, 9) | st.booleans() | st.none(),
    type(None): st.none(),
}


def reached(annotation: Any) -> set[str]:
    """The names of all plan classes that a type is made of."""
    kind = typing.get_origin(annotation) or annotation
    found: set[str] = set()
    if is_dataclass(kind):
        found.add(kind.__name__)  # type: ignore[union-attr]
        for hint in typing.get_type_hints(kind).values():
            found |= reached(hint)
    for inner in typing.get_args(annotation):
        found |= reached(inner)
    return found


def test_the_strategy_makes_every_class_of_a_plan() -> None:
    settings_only = {"Settings", "BrokerPlan", "TlsPlan", "RetentionPlan", "Judged"}
    declared = {
        name
        for name, each in vars(plans).items()
        if isinstance(each, type) and is_dataclass(each) and each.__module__ == plans.__name__
    }
    assert reached(Plan) == declared - settings_only


@settings(max_examples=60, deadline=None)
@given(made(Plan))
def test_a_plan_comes_back_as_it_was(plan: Plan) -> None:
    text = plan_json.encode(plan)
    again = plan_json.decode(text)
    assert again == plan
    assert plan_json.encode(again) == text


@settings(max_examples=60, deadline=None)
@given(made(CharacteristicPlan), st.randoms(use_true_random=False))
def test_equal_plans_give_equal_bytes(one: CharacteristicPlan, chance: Any) -> None:
    streams = list(one.by_stream.items())
    chance.shuffle(streams)
    other = plan_json.decode(plan_json.encode(Plan((one,)))).characteristics[0]
    shuffled: dict[Stream, Any] = dict(streams)
    object.__setattr__(other, "by_stream", shuffled)
    assert one == other
    assert plan_json.encode(Plan((one,))) == plan_json.encode(Plan((other,)))


def test_a_real_one(tmp_path: Path) -> None:
    path = tmp_path / "driftbell.yaml"
    path.write_text(yaml.safe_dump({**CONFIGURATION, "broker": {"host": "localhost"}}))
    plan = read_settings(path, {}).plan
    assert plan_json.decode(plan_json.encode(plan)) == plan


def changed(plan: Plan, change: typing.Callable[[dict[str, Any]], None]) -> bytes:
    """The plan's JSON with a change to its first characteristic."""
    text: Any = json.loads(plan_json.encode(plan))
    change(text["characteristics"][0])
    return json.dumps(text).encode()


@pytest.mark.parametrize(
    "change",
    [
        lambda c: c.update({"is": "SomethingElse"}),
        lambda c: c.update(more=1),
        lambda c: c.pop("title"),
        lambda c: c.pop("is"),
        lambda c: c["subgroup"].update(window="1s"),
    ],
)
def test_what_another_version_wrote_is_refused(
    change: typing.Callable[[dict[str, Any]], None], tmp_path: Path
) -> None:
    path = tmp_path / "driftbell.yaml"
    path.write_text(yaml.safe_dump({**CONFIGURATION, "broker": {"host": "localhost"}}))
    plan = read_settings(path, {}).plan
    with pytest.raises(ValueError, match="another version"):
        plan_json.decode(changed(plan, change))


@pytest.mark.parametrize("text", [b"", b"{", b"1", b"[]", b'{"is": "ByCount", "size": 1}'])
def test_what_is_no_plan_is_refused(text: bytes) -> None:
    with pytest.raises(ValueError):
        plan_json.decode(text)
