"""Numbers written with a comma, as much of Europe writes them: what was meant.

Knows how such a number looks, alone or cut in two by braces. Must not know keys, or YAML's events.
"""

from __future__ import annotations

import re

HOLDS_ONE = "has a decimal comma"

_WHOLE = r"[-+]?[0-9]+"
_FRACTION = r"[0-9]+([eE][-+]?[0-9]+)?"
_UNIT = r"\s*([A-Za-z]+|/\s*[a-z]+)?"  # of a duration, a size or a rate
_LEFT = re.compile(_WHOLE, re.ASCII)
_RIGHT = re.compile(_FRACTION + _UNIT, re.ASCII)
_NUMBER = re.compile(f"({_WHOLE}),({_FRACTION}{_UNIT})", re.ASCII)
_THOUSANDS = re.compile(r"[-+]?[1-9][0-9]{0,2}(,[0-9]{3})+", re.ASCII)


def is_cut(left: str, right: str) -> bool:
    """Whether ``left``, a value, and ``right``, a key without one, are the halves of a number."""
    return bool(_LEFT.fullmatch(left) and _RIGHT.fullmatch(right))


def pointed(text: str) -> str | None:
    """``text`` with a point for its comma; None where it is no number with a comma."""
    found = _NUMBER.fullmatch(text)
    return f"{found[1]}.{found[2]}" if found else None


def instead(text: str, *, whole: bool = False) -> str | None:
    """What to write for ``text``, ``whole`` where only a whole number will do; None as above, and
    where the number that it is would not do either."""
    grouped, point = bool(_THOUSANDS.fullmatch(text)), pointed(text)
    plain = text.replace(",", "")
    if grouped and (whole or point is None):
        return f"write {plain}: without a comma"
    if whole or point is None:
        return None
    thousands = f", or {plain} if thousands are meant" if grouped else ""
    return f"write {point}: a decimal point{thousands}"
