"""Reads a configuration: files to a tree, the tree to checked sections, or all that is wrong.

Knows files and what must be true between sections. Must not know what a section holds
(that is ``sections``) or what the engine makes of it (``resolve``).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from itertools import combinations
from pathlib import Path
from typing import TypeVar

from pydantic import ValidationError

from monitor import filters
from monitor.configuration import baseline_files, credentials, yamltree
from monitor.configuration.complaints import Complaint, complaints, shown
from monitor.configuration.problems import ConfigurationError, Problem, dotted
from monitor.configuration.problems import Path as KeyPath
from monitor.configuration.sections.document import DAEMON, Document, Measured
from monitor.configuration.unjudged import Baselines, Keys, with_baselines, with_keys
from monitor.configuration.yamltree import Flaw, Node, UnreadableError

__all__ = ["Config", "ConfigurationError", "load", "load_measured"]

_PUBLISHED = ("alert/#", "standing/#", "baseline/#", "point/#", "health", "setaside", "command/#")

D = TypeVar("D", bound=Measured)


@dataclass(frozen=True, slots=True)
class Config:
    """A configuration without a fault. ``folder`` is what its paths are relative to."""

    document: Document
    folder: Path
    password: str | None = field(default=None, repr=False)


def load(path: Path, environ: Mapping[str, str]) -> Config:
    """Read one file, or a folder whose ``*.yaml`` merge; ``environ`` fills in ``${NAME}``.

    Raises ConfigurationError with everything that is wrong.
    """
    reading = _Reading(path, environ)
    password, secret = credentials.password(reading.tree, reading.folder)
    more = [*secret, *credentials.certificates(reading.tree, reading.folder)]
    return Config(reading.checked(Document, more), reading.folder, password)


def load_measured(
    path: Path,
    environ: Mapping[str, str],
    baselines: Baselines | None = None,
    instead: Keys | None = None,
) -> Measured:
    """Read only what a replay needs: it has no broker, and no password to read.

    With ``baselines`` only the characteristics named in them are judged, by these instead of what
    is written; ``instead`` are keys that take the place of what is written. Other arguments and
    errors are those of ``load``.
    """
    reading = _Reading(path, environ, leaving=DAEMON, baselines=baselines, instead=instead)
    return reading.checked(Measured, [])


class _Reading:
    """A configuration as it was found. Raises ConfigurationError where there is none to judge."""

    def __init__(
        self,
        path: Path,
        environ: Mapping[str, str],
        *,
        leaving: frozenset[str] = frozenset(),
        baselines: Baselines | None = None,
        instead: Keys | None = None,
    ) -> None:
        flaws: list[Flaw] = []
        trees, self._unreadable = _trees(path, environ, flaws)
        if not trees:
            raise ConfigurationError(self._unreadable or [_nothing(path)])
        self.folder = path if path.is_dir() else path.parent
        whole = yamltree.without(yamltree.merged(trees, flaws), leaving)
        flaws = [flaw for flaw in flaws if not (flaw.path and flaw.path[0] in leaving)]
        if baselines is not None:
            whole = with_baselines(whole, baselines)
        if instead is not None:
            whole = with_keys(whole, instead)
        self._planted = baseline_files.plant(whole, self.folder, environ)
        self.tree = self._planted.tree
        self._flaws = [*flaws, *self._planted.flaws, *_blanks(self.tree)]

    def checked(self, model: type[D], found: list[Complaint]) -> D:
        """The configuration as ``model``, where neither that nor ``found`` leaves a complaint."""
        document: D | None = None
        try:
            document = model.model_validate(yamltree.plain(self.tree))
        except ValidationError as error:
            found = [*complaints(error, model, self.tree), *found]
        found = [*found, *_names(self.tree), *_topics(self.tree), *self._planted.strangers()]
        silenced = [flaw.path for flaw in self._flaws if flaw.path is not None]
        problems = self._unreadable + [flaw.problem for flaw in self._flaws]
        for complaint in found:
            if self._unreadable and complaint.absent:
                continue  # what is missing may stand in the file that cannot be read
            if not any(complaint.path[: len(flaw)] == flaw for flaw in silenced):
                problems.append(complaint.problem)
        if problems or document is None:
            raise ConfigurationError(map(self._planted.placed, problems))
        return document


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
