"""Baselines in files of their own, put where the configuration names them.

Knows how such a file is found and read. Must not know what a baseline holds.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from monitor.configuration import yamltree
from monitor.configuration.complaints import Complaint, shown
from monitor.configuration.problems import Path as KeyPath
from monitor.configuration.problems import Problem, dotted
from monitor.configuration.yamltree import Flaw, Node, UnreadableError


@dataclass(slots=True)
class Planted:
    """A tree with each baseline file's content in place of its path, and the flaws met.

    ``files``: where contents were put, and what their files are called.
    """

    tree: Node
    flaws: list[Flaw] = field(default_factory=list)
    files: dict[KeyPath, str] = field(default_factory=dict)

    def strangers(self) -> Iterator[Complaint]:
        """Baselines for another characteristic than the one that names their file."""
        for path in self.files:
            here, name = (*path, "characteristic"), path[1]
            node = yamltree.at(self.tree, here)
            if node and isinstance(node.value, str) and node.value != name:
                wrong = f"{shown(node)} is not {name}, whose baseline this file is named as"
                instead = f"write {name}, or name another file there"
                yield Complaint(here, Problem(node.file, node.line, dotted(here), wrong, instead))

    def placed(self, problem: Problem) -> Problem:
        """The problem with its key as the baseline file has it, where it stands in one."""
        for path, file in self.files.items():
            inside = f"{dotted(path)}."
            if problem.file == file and problem.key.startswith(inside):
                return replace(problem, key=problem.key.removeprefix(inside))
        return problem


def plant(tree: Node, folder: Path, environ: Mapping[str, str]) -> Planted:
    """Read every baseline file that the configuration in ``folder`` names."""
    planted = Planted(tree)
    characteristics = yamltree.at(tree, ("characteristics",))
    named = characteristics.value if characteristics else None
    for name in named if isinstance(named, dict) else ():
        path = ("characteristics", name, "baseline", "file")
        node = yamltree.at(tree, path)
        if node is None or node.value is None:
            continue
        content = _content(node, path, folder, environ, planted.flaws)
        if content is not None:
            planted.tree = yamltree.put(planted.tree, path, content)
            planted.files[path] = content.file
    return planted


def _content(
    node: Node, path: KeyPath, folder: Path, environ: Mapping[str, str], flaws: list[Flaw]
) -> Node | None:
    """The file's tree; None, with a flaw at ``path``, where there is none."""
    inside: list[Flaw] = []
    if isinstance(node.value, str):
        file = str(folder / node.source)  # as written: a variable's content is never shown
        try:
            content = yamltree.read((folder / node.value).read_bytes(), file, environ, inside)
        except OSError as error:
            wrong = f"the file cannot be read ({error.strerror})"
        except UnreadableError as error:
            flaws.append(Flaw(path, error.problem))
            return None
        except ValueError:  # a NUL, or what no file system can encode
            wrong = "no file has such a name"
        else:
            flaws += [Flaw(f.path and (*path, *f.path), f.problem) for f in inside]
            if content is not None and isinstance(content.value, dict):
                return content
            flaws.append(
                Flaw(path, Problem(file, 1, "", "holds no baseline", "begin with version: 1"))
            )
            return None
    else:
        wrong = f"{shown(node)} is not text"
    instead = (
        "write the path of a baseline file, relative to the configuration; "
        "`driftbell-replay baseline` makes one"
    )
    flaws.append(Flaw(path, Problem(node.file, node.line, dotted(path), wrong, instead)))
    return None
