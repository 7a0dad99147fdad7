"""What is wrong with a configuration, as a list that is shown all at once.

Knows how one problem reads: file, line, key, what is wrong, what to write instead. Must not know
YAML, pydantic or any key.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

Path = tuple[str | int, ...]
"""Keys and list positions from the root of the configuration to a value."""


def dotted(path: Path) -> str:
    """``characteristics.net-weight.detectors[1].width``."""
    text = ""
    for step in path:
        text += f"[{step}]" if isinstance(step, int) else f".{step}" if text else step
    return text


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing to mend. ``line`` is None where the whole file or folder is meant."""

    file: str
    line: int | None
    key: str
    wrong: str
    instead: str

    def __str__(self) -> str:
        where = self.file if self.line is None else f"{self.file}:{self.line}"
        key = f"{self.key}: " if self.key else ""
        return f"{where}: {key}{self.wrong}; {self.instead}"


class ConfigurationError(Exception):
    """Everything that keeps a configuration from being used, sorted by file and line.

    Its text is a line that counts, then a line for each problem.
    """

    def __init__(self, problems: Iterable[Problem]) -> None:
        unique = dict.fromkeys(problems)
        self.problems = tuple(sorted(unique, key=lambda p: (p.file, p.line or 0, p.key, p.wrong)))
        super().__init__("\n".join([f"{self.count}:", *map(str, self.problems)]))

    @property
    def count(self) -> str:
        """How many there are, in words."""
        number = len(self.problems)
        return f"the configuration has {number} problem{'s' if number > 1 else ''}"
