"""What all sections share: strictness, and faults that say what to do.

Knows pydantic. Must not know any key.

A field's description completes the sentence "write …" in an error. What a fault says is a predicate
of the value at its path ("is not above lower"); it quotes nothing, since any text may be a secret.
"""

from __future__ import annotations

from collections.abc import Sequence

from pydantic import BaseModel, ConfigDict
from pydantic_core import PydanticCustomError

from monitor.configuration.problems import Path

FAULT = "fault"


class Section(BaseModel):
    """A mapping of known keys. Strict: text is no number, a boolean is neither."""

    model_config = ConfigDict(
        strict=True,
        extra="forbid",
        frozen=True,
        allow_inf_nan=False,
        hide_input_in_errors=True,
        populate_by_name=False,
    )


def fault(wrong: str, instead: str, *path: str | int, absent: bool = False) -> PydanticCustomError:
    """An error that says what is wrong and what to do instead, at ``path`` below the value.

    ``absent``: something is missing, which may only be the echo of another mistake.
    """
    return faults([(path, wrong, instead)], absent=absent)


def faults(found: list[tuple[Path, str, str]], *, absent: bool = False) -> PydanticCustomError:
    """Several at once."""
    return PydanticCustomError(FAULT, "see the faults", {"faults": found, "absent": absent})


def either(words: Sequence[str]) -> str:
    """``a, b or c``."""
    *most, last = words
    return f"{', '.join(most)} or {last}" if most else last
