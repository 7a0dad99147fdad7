"""What pydantic refuses, in words for the person who wrote the file.

Knows the models and the places of their values. Must not know files or what a key is for: the
models carry that as descriptions.
"""

from __future__ import annotations

import difflib
import types
from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import ValidationError
from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from monitor.configuration import decimal_comma
from monitor.configuration.problems import Path, Problem, dotted
from monitor.configuration.sections.base import FAULT, Section, either
from monitor.configuration.sections.document import NOT_BUILT_KEYS, NOT_BUILT_VALUES
from monitor.configuration.yamltree import Filled, Node, child_of, scalar

_KEY = "[key]"  # how pydantic marks that the key itself is meant
_HIDDEN = {"password_file", "key"}  # someone will write the secret itself there
_TYPES = ("int_type", "float_type", "bool_type")
_ANY = "*"  # stands for every key
_LONGEST = 60  # characters of a value that an error shows

_WRONG = {
    "missing": "is missing",
    "int_type": "{shown} is not a whole number",
    "float_type": "{shown} is not a number",
    "bool_type": "{shown} is neither true nor false",
    "string_type": "{shown} is not text",
    "list_type": "{shown} is not a list",
    "dict_type": "{shown} is not a mapping",
    "model_type": "{shown} is not a mapping",
    "model_attributes_type": "{shown} is not a mapping",
    "finite_number": "{shown} is not a finite number",
    "greater_than": "{shown} is not above {gt:g}",
    "greater_than_equal": "{shown} is below {ge:g}",
    "less_than": "{shown} is not below {lt:g}",
    "less_than_equal": "{shown} is above {le:g}",
    "literal_error": "{shown} is not known here",
    "string_pattern_mismatch": "{shown} holds a character that does not belong here",
    "string_too_short": "is empty",
    "string_too_long": "{shown} is longer than {max_length} characters",
    "too_short": "is empty",
    "too_long": "holds more than {max_length}",
}


@dataclass(frozen=True, slots=True)
class Complaint:
    """A problem with its path; ``absent`` where something is missing."""

    path: Path
    problem: Problem
    absent: bool = False


def complaints(error: ValidationError, root: type[Section], tree: Node) -> list[Complaint]:
    """One complaint for each thing to mend, each at the line that holds it."""
    found: list[Complaint] = []
    meant: dict[Path, set[str]] = defaultdict(set)
    for detail in error.errors(include_url=False, include_input=False):
        trace = _trace(root, detail["loc"])
        if detail["type"] == "extra_forbidden":
            complaint, keys = _unknown_key(trace, tree)
            meant[trace.path[:-1]] |= keys
            found.append(complaint)
        elif detail["type"] == FAULT:
            found += _own(detail["ctx"], trace, tree)
        else:
            found.append(_refused(detail, trace, tree))
    # A key that is misspelt or not built yet is not missing as well.
    return [
        complaint
        for complaint in found
        if not (complaint.absent and meant[complaint.path[:-1]] & {complaint.path[-1], _ANY})
    ]


@dataclass(frozen=True, slots=True)
class _Trace:
    """Where a pydantic location leads: the path without the tags of unions, the section that holds
    the value and what may be written there."""

    path: Path
    section: type[Section]
    name: str
    hint: str
    annotation: Any
    key: bool

    @property
    def tags(self) -> list[str]:
        """The kinds of detector, or the rules, that may stand here."""
        return [_tag(member) for member in _members(self.annotation)]


def _trace(root: type[Section], location: tuple[str | int, ...]) -> _Trace:
    key = location[-1] == _KEY
    annotation: Any = root
    container: Any = dict[str, Any]
    path: Path = ()
    section, name, hint = root, "", ""
    for step in location[:-1] if key else location:
        annotation, note = _bare(annotation)
        hint = note or hint
        if members := _members(annotation):
            annotation = next(member for member in members if _tag(member) == step)
            continue
        path = (*path, step)
        if _is_section(annotation):
            section, name = annotation, str(step)
            field = _field(section, name)
            annotation, hint = (field.annotation, field.description or "") if field else (None, "")
        else:
            container, annotation = annotation, get_args(annotation)[-1]
    if key:
        annotation = get_args(container)[0]
    annotation, note = _bare(annotation)
    return _Trace(path, section, name, note or hint, annotation, key)


def _bare(annotation: Any) -> tuple[Any, str]:
    """Without Annotated and None; and what an Annotated says may be written."""
    hint = ""
    while True:
        if get_origin(annotation) is Annotated:
            annotation, *notes = get_args(annotation)
            hint = next(
                (n.description for n in notes if isinstance(n, FieldInfo) and n.description), hint
            )
        elif type(None) in get_args(annotation):
            (annotation,) = [a for a in get_args(annotation) if a is not type(None)]
        else:
            return annotation, hint


def _members(annotation: Any) -> tuple[Any, ...]:
    return get_args(annotation) if get_origin(annotation) in (Union, types.UnionType) else ()


def _is_section(annotation: Any) -> bool:
    return isinstance(annotation, type) and issubclass(annotation, Section)


def _tag(member: type[Section]) -> str:
    field = member.model_fields.get("kind") or member.model_fields["rule"]
    tag: str = get_args(field.annotation)[0]
    return tag


def _field(section: type[Section], key: str) -> FieldInfo | None:
    return next((f for name, f in section.model_fields.items() if (f.alias or name) == key), None)


def _locate(tree: Node, path: Path) -> tuple[Node, Path]:
    """The deepest node on the way, and the path that leads there. Steps that the file does not have
    are left out: one value for all sides was spread over up, down and other."""
    node = tree
    real: Path = ()
    for step in path:
        child = child_of(node, step)
        if child is not None:
            node, real = child, (*real, step)
    return node, real


def _problem(node: Node, path: Path, wrong: str, instead: str) -> Problem:
    return Problem(node.file, node.line, dotted(path), wrong, instead)


def shown(node: Node) -> str:
    """A value as an error may show it: as it is written, variables not filled in."""
    if isinstance(node.value, dict):
        return "a mapping"
    if isinstance(node.value, list):
        return "a list"
    text = node.source if len(node.source) <= _LONGEST else f"{node.source[:_LONGEST]}…"
    return repr(text) if isinstance(node.value, str) else text


def _subject(node: Node, path: Path) -> str:
    return "the value" if path and path[-1] in _HIDDEN else shown(node)


def _with_point(node: Node, *, whole: bool = False) -> str | None:
    """What to write for a number with a decimal comma; None where that is not what it is."""
    if not isinstance(node.value, str) or isinstance(node.value, Filled):
        return None
    return decimal_comma.instead(node.source, whole=whole)


def _unknown_key(trace: _Trace, tree: Node) -> tuple[Complaint, set[str]]:
    """The complaint, and which keys will have been meant."""
    node, path = _locate(tree, trace.path)
    key, section = trace.name, trace.section
    if any(key in keys for owner, keys in NOT_BUILT_KEYS.items() if issubclass(section, owner)):
        problem = _problem(node, path, "is not built yet", "leave it out for now")
        return Complaint(trace.path, problem), {_ANY}
    known = [field.alias or name for name, field in section.model_fields.items()]
    near = difflib.get_close_matches(key, known, n=1)
    instead = f"did you mean {near[0]}?" if near else f"known here: {', '.join(known)}"
    return Complaint(trace.path, _problem(node, path, "is not a known key", instead)), set(near)


def _own(context: dict[str, Any], trace: _Trace, tree: Node) -> Iterator[Complaint]:
    """Faults that the models found themselves."""
    for below, wrong, instead in context["faults"]:
        path = (*trace.path, *below)
        node, real = _locate(tree, path)
        if context["absent"]:
            yield Complaint(path, _problem(node, (*real, path[-1]), wrong, instead), absent=True)
            continue
        if isinstance(node.value, Filled):
            wrong = "is not what belongs here, once its variables are filled in"
        if with_point := _with_point(node):  # a duration, a size or a rate
            wrong, instead = decimal_comma.HOLDS_ONE, with_point
        if not isinstance(node.value, dict | list):
            wrong = f"{_subject(node, real)} {wrong}"
        yield Complaint(path, _problem(node, real, wrong, instead))


def _refused(detail: ErrorDetails, trace: _Trace, tree: Node) -> Complaint:
    """What pydantic's own checks refused."""
    node, path = _locate(tree, trace.path)
    kind = detail["type"]
    wrong = _WRONG.get(kind, "{shown} does not belong here")
    hint = trace.hint
    if kind == "missing":
        path = (*path, trace.path[-1])
    elif kind in ("union_tag_not_found", "union_tag_invalid"):
        # A detector without a known kind, or a rule without a known name.
        key = detail["ctx"]["discriminator"].strip("'")
        hint = f"{key}: {either(trace.tags)}"
        path = (*path, key)
        tag = child_of(node, key)
        node, wrong = (tag, _WRONG["literal_error"]) if tag else (node, _WRONG["missing"])
    elif kind == "literal_error" and node.source in NOT_BUILT_VALUES.get(trace.name, ()):
        wrong = "{shown} is not built yet"
    subject = "the name" if trace.key else _subject(node, path)
    if kind in _TYPES and isinstance(node.value, str) and not isinstance(scalar(node.source), str):
        wrong, hint = "{shown} is text, since it stands in quotes", "it without quotes"
    with_point = _with_point(node, whole=kind == "int_type") if kind in _TYPES else None
    if with_point and kind == "float_type":
        wrong = f"{{shown}} {decimal_comma.HOLDS_ONE}"
    wrong = wrong.format(shown=subject, **detail.get("ctx", {}))
    problem = _problem(node, path, wrong, with_point or f"write {hint}")
    return Complaint(trace.path, problem, absent=kind == "missing")
