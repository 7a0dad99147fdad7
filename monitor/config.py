"""Reads a configuration: files to a tree, the tree to checked sections, or all that is wrong.

Knows files, secrets and what must be true between sections. Must not know what a section holds
(that is ``sections``) or what the engine makes of it (``resolve``).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from itertools import combinations
from pathlib import Path

from pydantic import ValidationError

from monitor import filters, yamltree
from monitor.complaints import Complaint, complaints, shown
from monitor.problems import ConfigurationError, Problem, dotted
from monitor.problems import Path as KeyPath
from monitor.sections.document import Document
from monitor.yamltree import Flaw, Node, UnreadableError

__all__ = ["Config", "ConfigurationError", "load"]

_PUBLISHED = ("alert/#", "standing/#", "point/#", "health", "setaside", "command/#")
_MAX_SECRET = 65_535  # bytes; what MQTT can carry


@dataclass(frozen=True, slots=True)
class Config:
    """A configuration without a fault. ``folder`` is what its paths are relative to."""

    document: Document
    folder: Path
    password: str | None = field(default=None, repr=False)


def load(path: Path, environ: Mapping[str, str], *, secrets: bool = True) -> Config:
    """Read one file, or a folder whose ``*.yaml`` merge; ``environ`` fills in ``${NAME}``.

    ``secrets``: whether the password is wanted too; a replay on another machine has none to read.
    Raises ConfigurationError with everything that is wrong.
    """
    flaws: list[Flaw] = []
    trees, unreadable = _trees(path, environ, flaws)
    if not trees:
        raise ConfigurationError(unreadable or [_nothing(path)])
    tree = yamltree.merged(trees, flaws)
    flaws += _blanks(tree)
    document: Document | None = None
    found: list[Complaint] = []
    try:
        document = Document.model_validate(yamltree.plain(tree))
    except ValidationError as error:
        found = complaints(error, Document, tree)
    folder = path if path.is_dir() else path.parent
    password, secret = _password(tree, folder) if secrets else (None, [])
    found += [*_names(tree), *_topics(tree), *secret]
    silenced = [flaw.path for flaw in flaws if flaw.path is not None]
    problems = unreadable + [flaw.problem for flaw in flaws]
    for complaint in found:
        if unreadable and complaint.absent:
            continue  # what is missing may stand in the file that cannot be read
        if not any(complaint.path[: len(flaw)] == flaw for flaw in silenced):
            problems.append(complaint.problem)
    if problems or document is None:
        raise ConfigurationError(problems)
    return Config(document, folder, password)


# ── files ────────────────────────────────────────────────────────────────────────────────────────


def _trees(
    path: Path, environ: Mapping[str, str], flaws: list[Flaw]
) -> tuple[list[Node], list[Problem]]:
    trees: list[Node] = []
    problems: list[Problem] = []
    for file in _files(path, problems):
        try:
            tree = yamltree.read(file.read_bytes(), str(file), environ, flaws)
        except OSError as error:
            problems.append(_unread(str(file), error))
        except UnreadableError as error:
            problems.append(error.problem)
        else:
            if tree is not None and isinstance(tree.value, dict):
                trees.append(tree)
            elif tree is not None:
                wrong = "a configuration is a mapping of keys"
                problems.append(Problem(str(file), tree.line, "", wrong, "begin with version: 1"))
    return trees, problems


def _files(path: Path, problems: list[Problem]) -> list[Path]:
    if not path.is_dir():
        return [path]
    try:
        visible = sorted(p for p in path.iterdir() if not p.name.startswith("."))
    except OSError as error:
        problems.append(_unread(str(path), error))
        return []
    for file in visible:
        if file.suffix.lower() in (".yml", ".yaml") and file.suffix != ".yaml":
            wrong = "is not read, because its name does not end in .yaml"
            problems.append(Problem(str(file), None, "", wrong, "rename it"))
    return [p for p in visible if p.suffix == ".yaml"]


def _unread(file: str, error: OSError) -> Problem:
    wrong = f"cannot be read ({error.strerror})"
    return Problem(file, None, "", wrong, "give the path of a readable file or folder")


def _nothing(path: Path) -> Problem:
    wrong = "holds no .yaml file with anything in it" if path.is_dir() else "is empty"
    return Problem(str(path), None, "", wrong, "begin with version: 1")


# ── the tree as a whole ──────────────────────────────────────────────────────────────────────────


def _blanks(tree: Node) -> Iterator[Flaw]:
    """Keys without a value: the writer meant something, and it would be guessing to go on."""
    for path, node in yamltree.walk(tree):
        if node.value is None and "use_if" not in path:
            wrong, instead = "has no value", "write one, or leave the key out"
            yield Flaw(path, Problem(node.file, node.line, dotted(path), wrong, instead))


def _children(tree: Node, *path: str) -> dict[str, Node]:
    node = yamltree.at(tree, path)
    return node.value if node and isinstance(node.value, dict) else {}


def _names(tree: Node) -> Iterator[Complaint]:
    """Two detectors of one name in a characteristic."""
    for name in _children(tree, "characteristics"):
        path = ("characteristics", name, "detectors")
        detectors = yamltree.at(tree, path)
        first: dict[str, Node] = {}
        items = detectors.value if detectors and isinstance(detectors.value, list) else []
        for index, item in enumerate(items):
            called = _called(item)
            other = first.setdefault(called, item) if called else item
            if other is not item:
                wrong = f"has the same name as the detector in line {other.line} ({called})"
                here = (*path, index)
                problem = Problem(
                    item.file, item.line, dotted(here), wrong, "write name: to tell them apart"
                )
                yield Complaint(here, problem)


def _called(detector: Node) -> str | None:
    name, kind, chart = (yamltree.at(detector, (key,)) for key in ("name", "kind", "chart"))
    if name:
        return name.source
    if kind is None:
        return None
    return f"{kind.source}-{chart.source}" if chart else kind.source


def _topics(tree: Node) -> Iterator[Complaint]:
    """Filters that would deliver a message twice, or read what we publish ourselves."""
    sources: list[tuple[KeyPath, Node, str]] = []
    for name in _children(tree, "characteristics"):
        path: KeyPath = ("characteristics", name, "source", "topic")
        node = yamltree.at(tree, path)
        if node and isinstance(node.value, str):
            try:
                sources.append((path, node, filters.parse(node.value).topic))
            except ValueError:
                continue  # the section says so
    for (path, node, topic), (_, other, earlier) in combinations(reversed(sources), 2):
        if topic != earlier and filters.overlap(topic, earlier):
            wrong = (
                f"{shown(node)} matches topics that {shown(other)} in {other.file}:{other.line} "
                "matches too, and the broker would deliver those twice"
            )
            instead = "write the same filter in both, or filters that share no topic"
            yield Complaint(path, Problem(node.file, node.line, dotted(path), wrong, instead))
    root = yamltree.at(tree, ("outputs", "root"))
    if root and isinstance(root.value, str) and not set("+#") & set(root.value):
        for path, node, topic in sources:
            if any(filters.overlap(topic, f"{root.value}/{each}") for each in _PUBLISHED):
                wrong = f"{shown(node)} also matches what we publish under outputs.root"
                instead = "write a narrower filter, or another outputs.root"
                yield Complaint(path, Problem(node.file, node.line, dotted(path), wrong, instead))


def _password(tree: Node, folder: Path) -> tuple[str | None, list[Complaint]]:
    path = ("broker", "password_file")
    node = yamltree.at(tree, path)
    if node is None or not isinstance(node.value, str):
        return None, []
    try:
        with (folder / node.value).open("rb") as file:
            secret = file.read(_MAX_SECRET + 2).decode().rstrip("\r\n")
        wrong = "is empty" if not secret else "is too long" if len(secret) > _MAX_SECRET else ""
    except OSError as error:
        wrong = f"cannot be read ({error.strerror})"
    except ValueError:  # not UTF-8, or a path with a NUL
        wrong = "is not a file of UTF-8 text"
    else:
        if not wrong:
            return secret, []
    problem = Problem(
        node.file,
        node.line,
        dotted(path),
        f"the file {wrong}",  # its name is not shown: someone will write the password here
        "write the path of a file that holds the password and nothing else",
    )
    return None, [Complaint(path, problem)]
