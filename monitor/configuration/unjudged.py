"""A configuration read as if other things stood in it: baselines to come, keys that are proposed.

Knows which keys say how readings are judged. Must not know how a baseline is estimated.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from monitor.configuration import yamltree
from monitor.configuration.yamltree import Node

_STAND_IN = {"baseline": {"mean": 0.0, "sigma": 1.0}, "detectors": [{"kind": "shewhart"}]}
_JUDGED_BY = ("baseline", "detectors", "promise")

Baselines = Mapping[str, Mapping[str, Any]]
"""Values by characteristic, as the key ``baseline`` takes them."""

Keys = Mapping[str, Mapping[str, Any]]
"""Keys of characteristics, that take the place of those that stand there."""


def with_baselines(tree: Node, baselines: Baselines) -> Node:
    """The configuration in which the characteristics named have these baselines, and all others
    stand-ins for everything that they are judged by: only their sources and subgroups count."""
    characteristics = tree.value.get("characteristics") if isinstance(tree.value, dict) else None
    if characteristics is None or not isinstance(characteristics.value, dict):
        return tree
    prepared = {
        name: _prepared(each, baselines.get(name)) for name, each in characteristics.value.items()
    }
    assert isinstance(tree.value, dict)
    found = {**tree.value, "characteristics": replace(characteristics, value=prepared)}
    return replace(tree, value=found)


def with_keys(tree: Node, instead: Keys) -> Node:
    """The configuration with these keys of these characteristics, which it has."""
    for name, keys in instead.items():
        path = ("characteristics", name)
        place = yamltree.at(tree, path)
        assert place is not None
        assert isinstance(place.value, dict)
        new = {key: _node(value, place) for key, value in keys.items()}
        tree = yamltree.put(tree, path, replace(place, value=place.value | new))
    return tree


def _prepared(characteristic: Node, baseline: Mapping[str, Any] | None) -> Node:
    if not isinstance(characteristic.value, dict):
        return characteristic
    if baseline is not None:
        own = {**characteristic.value, "baseline": _node(baseline, characteristic)}
        return replace(characteristic, value=own)
    kept = {k: v for k, v in characteristic.value.items() if k not in _JUDGED_BY}
    stand_in = {key: _node(value, characteristic) for key, value in _STAND_IN.items()}
    return replace(characteristic, value=kept | stand_in)


def _node(value: Any, place: Node) -> Node:
    if isinstance(value, Mapping):
        return Node(place.file, place.line, {k: _node(v, place) for k, v in value.items()})
    if isinstance(value, list):
        return Node(place.file, place.line, [_node(each, place) for each in value])
    return Node(
        place.file, place.line, value, value if isinstance(value, str) else json.dumps(value)
    )
