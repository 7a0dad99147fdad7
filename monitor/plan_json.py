"""A plan as JSON and back, for the journal: what was in force must be known long after.

Knows how frozen dataclasses, tuples and mappings are written. Must not know what any of them means.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from typing import Any

import orjson

from monitor import plan as plans
from monitor.plan import Plan

_KIND, _PAIRS = "is", "pairs"
_CLASSES = {
    name: each
    for name, each in vars(plans).items()
    if isinstance(each, type) and is_dataclass(each)
}


def encode(plan: Plan) -> bytes:
    """The plan as JSON; equal plans give equal bytes."""
    return orjson.dumps(plain(plan))


def decode(text: bytes) -> Plan:
    """The plan that ``encode`` was given; ValueError where the text is none of this version."""
    try:
        plan = restored(orjson.loads(text))
    except (KeyError, TypeError) as error:
        raise ValueError(f"a plan of another version: {error}") from error
    if not isinstance(plan, Plan):
        raise ValueError("no plan")
    return plan


def plain(value: Any) -> Any:
    """A part of a plan as JSON values."""
    if is_dataclass(value):
        named = {each.name: plain(getattr(value, each.name)) for each in fields(value)}
        return {_KIND: type(value).__name__, **named}
    if isinstance(value, tuple):
        return [plain(each) for each in value]
    if isinstance(value, Mapping):
        # In one order: mappings that differ only in theirs are equal.
        pairs = [[plain(key), plain(each)] for key, each in value.items()]
        return {_PAIRS: sorted(pairs, key=lambda pair: orjson.dumps(pair[0]))}
    return value


def restored(value: Any) -> Any:
    """What ``plain`` was given; KeyError or TypeError where it is of another version."""
    if isinstance(value, list):
        return tuple(restored(each) for each in value)
    if not isinstance(value, dict):
        return value
    if _PAIRS in value:
        return {restored(key): restored(each) for key, each in value[_PAIRS]}
    made = _CLASSES[value[_KIND]]
    return made(**{name: restored(each) for name, each in value.items() if name != _KIND})
