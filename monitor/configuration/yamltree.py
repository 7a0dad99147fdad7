"""YAML text as a tree in which every value knows its file and line.

Knows syntax: scalars of YAML 1.2, duplicate keys, aliases, ``${VARIABLE}``, merging several files.
Must not know which keys mean something.
"""

from __future__ import annotations

import re
from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import yaml

from monitor.configuration import decimal_comma
from monitor.configuration.problems import Path, Problem, dotted

Scalar = str | int | float | bool | None

MAX_DEPTH = 40
MAX_ALIASED = 100_000  # values that aliases may repeat in all: a "billion laughs" ends here
EXACT = 2**53 - 1  # the largest integer every JSON reader keeps exactly (RFC 7493)

_LOADER: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)  # libyaml where the wheel has it
_UNPRINTABLE = re.compile("[^\t\n\r\x20-\x7e\x85\xa0-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
_VARIABLE = re.compile(r"\$\{([A-Za-z_][A-Za-z0-9_]*)\}")
_MERGE = "<<"

# The core schema of YAML 1.2.2, section 10.3.2. The 1.1 rules of most readers turn on, no and 12:30
# into something else than what is written.
_WORDS: dict[str, Scalar] = {
    **dict.fromkeys(("", "~", "null", "Null", "NULL")),
    **dict.fromkeys(("true", "True", "TRUE"), True),
    **dict.fromkeys(("false", "False", "FALSE"), False),
}
_INTEGER = re.compile(r"[-+]?[0-9]+", re.ASCII)
_BASED = re.compile(r"0o[0-7]+|0x[0-9a-fA-F]+", re.ASCII)
_FLOAT = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?", re.ASCII)
_NOT_FINITE = re.compile(r"[-+]?\.(inf|Inf|INF)|\.(nan|NaN|NAN)")


class Filled(str):
    """A text that a variable was filled into: it may hold a secret, so no message may quote it."""

    __slots__ = ()


@dataclass(frozen=True, slots=True)
class Node:
    """A value, and the place of the key or list item that holds it."""

    file: str
    line: int
    value: Scalar | Filled | list[Node] | dict[str, Node]
    source: str = ""
    """A scalar as it is written, variables not filled in."""
    size: int = 1
    """How many values it holds, itself and aliased ones included."""
    height: int = 0
    """How many levels lie below it."""


@dataclass(frozen=True, slots=True)
class Flaw:
    """A problem of the tree. ``path`` is where nothing more should be said, since the value there
    is not the one that was meant; None where the values can be judged all the same."""

    path: Path | None
    problem: Problem


class UnreadableError(Exception):
    """The text is no YAML that could be read on."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(str(problem))
        self.problem = problem


def scalar(text: str) -> Scalar:
    """What a plain (unquoted) scalar means; integers beyond ``EXACT`` become floats."""
    if text in _WORDS:
        return _WORDS[text]
    if _INTEGER.fullmatch(text) and len(text) < 18:
        number = int(text)
        return number if abs(number) <= EXACT else float(number)
    if _BASED.fullmatch(text) and len(text) < 15:
        return int(text, 0)
    if _FLOAT.fullmatch(text):
        return float(text)
    if _NOT_FINITE.fullmatch(text):
        return float(text.replace(".", ""))
    return text


def read(content: bytes, file: str, environ: Mapping[str, str], flaws: list[Flaw]) -> Node | None:
    """The tree of one document, None where it is empty; flaws that can be read past are appended.

    Raises UnreadableError at an error of syntax, at aliases that multiply beyond measure and at a
    text that is not UTF-8.
    """
    text = _decoded(content, file)
    return _Composer(text, file, environ, flaws).document()


def merged(nodes: Sequence[Node], flaws: list[Flaw]) -> Node:
    """Several mappings as one; a leaf in two of them is a flaw, and the first counts."""
    first, *others = nodes
    for other in others:
        first = _merge(first, other, (), flaws)
    return first


def plain(node: Node) -> Any:
    """The tree as dicts, lists and scalars."""
    if isinstance(node.value, dict):
        return {key: plain(child) for key, child in node.value.items()}
    if isinstance(node.value, list):
        return [plain(child) for child in node.value]
    return node.value


def at(node: Node, path: Path) -> Node | None:
    """The node at ``path``, or None."""
    for step in path:
        child = child_of(node, step)
        if child is None:
            return None
        node = child
    return node


def child_of(node: Node, step: str | int) -> Node | None:
    """The child of that key or list position, or None."""
    if isinstance(node.value, dict) and isinstance(step, str):
        return node.value.get(step)
    if isinstance(node.value, list) and isinstance(step, int) and step < len(node.value):
        return node.value[step]
    return None


def put(node: Node, path: Path, child: Node) -> Node:
    """The tree with ``child`` at ``path``, which holds something now; nothing is changed in place,
    since aliases share what they stand for."""
    if not path:
        return child
    step, rest = path[0], path[1:]
    if isinstance(node.value, dict) and isinstance(step, str):
        return replace(node, value={**node.value, step: put(node.value[step], rest, child)})
    raise KeyError(step)


def without(node: Node, keys: Collection[str]) -> Node:
    """A mapping without those keys."""
    assert isinstance(node.value, dict)
    return replace(node, value={k: v for k, v in node.value.items() if k not in keys})


def walk(node: Node, path: Path = ()) -> Iterator[tuple[Path, Node]]:
    """Every node with its path, parents first."""
    yield path, node
    if isinstance(node.value, dict):
        for key, child in node.value.items():
            yield from walk(child, (*path, key))
    elif isinstance(node.value, list):
        for index, child in enumerate(node.value):
            yield from walk(child, (*path, index))


def _decoded(content: bytes, file: str) -> str:
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        problem = Problem(file, line, "", "this line is not UTF-8", "save the file as UTF-8")
        raise UnreadableError(problem) from None
    if bad := _UNPRINTABLE.search(text):
        line = text.count("\n", 0, bad.start()) + 1
        wrong = f"this line holds the control character U+{ord(bad[0]):04X}"
        raise UnreadableError(Problem(file, line, "", wrong, "delete it"))
    return text


def _merge(one: Node, two: Node, path: Path, flaws: list[Flaw]) -> Node:
    if isinstance(one.value, dict) and isinstance(two.value, dict):
        together = dict(one.value)
        for key, child in two.value.items():
            mine = together.get(key)
            together[key] = _merge(mine, child, (*path, key), flaws) if mine else child
        return replace(one, value=together)
    wrong = f"also stands in {one.file}:{one.line}"
    problem = Problem(two.file, two.line, dotted(path), wrong, "keep one of the two")
    flaws.append(Flaw(None, problem))
    return one


class _Composer:
    """Parser events into nodes. PyYAML's own composer resolves by the rules of YAML 1.1, keeps the
    last of two equal keys and lets aliases multiply."""

    def __init__(self, text: str, file: str, environ: Mapping[str, str], flaws: list[Flaw]) -> None:
        self._events: Iterator[Any] = yaml.parse(text, Loader=_LOADER)
        self._file = file
        self._lines = text.count("\n") + (not text.endswith("\n"))
        self._environ = environ
        self._flaws = flaws
        self._anchors: dict[str, Node] = {}
        self._aliased = 0

    def document(self) -> Node | None:
        self._next()  # the stream's start
        if isinstance(self._next(), yaml.StreamEndEvent):
            return None
        node = self._node(self._next(), (), 0)
        self._next()  # the document's end
        if not isinstance(event := self._next(), yaml.StreamEndEvent):
            raise self._unreadable(
                event, "a second document begins here", "put it in a file of its own"
            )
        return None if node.value is None else node

    def _next(self) -> Any:
        try:
            return next(self._events)
        except yaml.YAMLError as error:
            mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
            problem = Problem(
                self._file,
                min(mark.line + 1, self._lines) if mark else None,
                "",
                f"this is not YAML ({getattr(error, 'problem', error)})",
                "look here and one line above for indentation, a missing colon or bracket, or a "
                "text with { } [ ] : # * & ! that needs quotes",
            )
            raise UnreadableError(problem) from None

    def _node(self, event: Any, path: Path, depth: int) -> Node:
        if depth > MAX_DEPTH:
            raise self._unreadable(event, "brackets or indentation nest too deep", "flatten this")
        if isinstance(event, yaml.AliasEvent):
            return self._alias(event, depth)
        if event.tag is not None and event.tag != "!":
            self._flaw(event, path, f"the tag {event.tag!r} is not used here", "leave the tag out")
        if isinstance(event, yaml.ScalarEvent):
            node = self._scalar(event, path)
        elif isinstance(event, yaml.MappingStartEvent):
            node = self._mapping(event, path, depth)
        else:
            node = self._list(event, path, depth)
        if event.anchor is not None:
            self._anchors[event.anchor] = node
        return node

    def _alias(self, event: Any, depth: int) -> Node:
        node = self._anchors.get(event.anchor)
        if node is None:
            raise self._unreadable(
                event,
                f"no anchor &{event.anchor} stands above *{event.anchor}",
                "write the anchor first, or put the text in quotes",
            )
        self._aliased += node.size
        if self._aliased > MAX_ALIASED or depth + node.height > MAX_DEPTH:
            raise self._unreadable(
                event, "the aliases up to here repeat too much", "write out what they stand for"
            )
        return replace(node, line=self._line(event))

    def _list(self, event: Any, path: Path, depth: int) -> Node:
        items: list[Node] = []
        while not isinstance(item := self._next(), yaml.SequenceEndEvent):
            node = self._node(item, (*path, len(items)), depth + 1)
            items.append(replace(node, line=self._line(item)))
        return self._collection(event, items, items)

    def _mapping(self, event: Any, path: Path, depth: int) -> Node:
        entries: dict[str, Node] = {}
        inherited: list[Node] = []
        while not isinstance(key := self._next(), yaml.MappingEndEvent):
            if not isinstance(key, yaml.ScalarEvent):
                raise self._unreadable(
                    key,
                    "a list, mapping or alias stands where a key should",
                    "put a text with { } [ ] or * in quotes",
                )
            name = key.value
            if _UNPRINTABLE.search(name):
                raise self._unreadable(key, f"the key {name!a} is no text", "write a plain key")
            node = replace(self._node(self._next(), (*path, name), depth + 1), line=self._line(key))
            if event.flow_style and node.source == "" and self._is_cut(entries, key, node):
                self._mend(key, path, entries)
            elif name == _MERGE and key.implicit[0]:
                inherited += node.value if isinstance(node.value, list) else [node]
            elif name in entries:
                wrong = f"stands twice in one mapping, first in line {entries[name].line}"
                self._flaw(key, (*path, name), wrong, "keep one of the two", judged=True)
            else:
                entries[name] = node
        for source in inherited:
            if isinstance(source.value, dict):
                entries = {**source.value, **entries}
            else:
                self._flaw(
                    event, path, "<< takes a mapping or a list of mappings", "name one by its alias"
                )
        return self._collection(event, entries, entries.values())

    def _is_cut(self, entries: dict[str, Node], key: Any, node: Node) -> bool:
        """Whether a key without a value is what a decimal comma cut off the value before it:
        ``{catch: 0,8}`` is the number 0 and a key 8."""
        if node.value is not None or not key.implicit[0] or not entries:
            return False
        before = list(entries.values())[-1]
        whole = isinstance(before.value, int)
        return whole and decimal_comma.is_cut(before.source, key.value)

    def _mend(self, key: Any, path: Path, entries: dict[str, Node]) -> None:
        """Put the number together again, so that all else is judged by what was meant."""
        name, before = list(entries.items())[-1]
        text = f"{before.source},{key.value}"
        wrong = f"{text} {decimal_comma.HOLDS_ONE}, which in braces begins another key"
        self._flaw(key, (*path, name), wrong, decimal_comma.instead(text) or "")
        value = scalar(decimal_comma.pointed(text) or "")
        entries[name] = replace(before, value=value, source=text)

    def _collection(
        self, event: Any, value: list[Node] | dict[str, Node], children: Collection[Node]
    ) -> Node:
        size = 1 + sum(child.size for child in children)
        height = 1 + max((child.height for child in children), default=0)
        return Node(self._file, self._line(event), value, size=size, height=height)

    def _scalar(self, event: Any, path: Path) -> Node:
        text: str = event.value
        value: Scalar = scalar(text) if event.implicit[0] else text
        if "${" in text:
            value = self._filled(event, path)
        if isinstance(value, str):
            self._printable(event, path, value)
        return Node(self._file, self._line(event), value, text)

    def _filled(self, event: Any, path: Path) -> Filled:
        text: str = event.value
        missing = [name for name in _VARIABLE.findall(text) if name not in self._environ]
        for name in dict.fromkeys(missing):
            wrong = f"the environment variable {name} is not set"
            self._flaw(event, path, wrong, "set it, or write the value here")
        if "${" in _VARIABLE.sub("", text):
            self._flaw(event, path, f"{text!r} has a ${{ that names no variable", "write ${NAME}")
        return Filled(_VARIABLE.sub(lambda found: self._environ.get(found[1], found[0]), text))

    def _printable(self, event: Any, path: Path, text: str) -> None:
        # The file as a whole was looked through, but "\ud800" and variables bring in anything.
        if bad := _UNPRINTABLE.search(text):
            wrong = f"holds the character U+{ord(bad[0]):04X}, which is no text"
            self._flaw(event, path, wrong, "leave that character out")

    def _line(self, event: Any) -> int:
        line: int = event.start_mark.line + 1
        return line

    def _flaw(
        self, event: Any, path: Path, wrong: str, instead: str, *, judged: bool = False
    ) -> None:
        problem = Problem(self._file, self._line(event), dotted(path), wrong, instead)
        self._flaws.append(Flaw(None if judged else path, problem))

    def _unreadable(self, event: Any, wrong: str, instead: str) -> UnreadableError:
        return UnreadableError(Problem(self._file, self._line(event), "", wrong, instead))
