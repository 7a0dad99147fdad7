"""MQTT topic filters (MQTT 3.1.1, section 4.7), and filters whose levels have names.

Knows levels and wildcards. Must not know what is published or who subscribes.
"""

from __future__ import annotations

import re
from typing import NamedTuple

STREAM_KEY = re.compile(r"[A-Za-z][A-Za-z0-9_-]*", re.ASCII)
MAX_BYTES = 65_535
_CONTROL = re.compile("[\0-\x1f\x7f]")
_CAPTURE = re.compile(r"\{([^{}]*)\}")


class Named(NamedTuple):
    """A filter to subscribe to, and which of its levels carry a stream key."""

    topic: str
    captures: tuple[tuple[int, str], ...]


def parse(text: str) -> Named:
    """``plant/{lane}/reading`` as ``plant/+/reading`` and ((1, "lane"),).

    Raises ValueError where it is no filter: a predicate ("is empty") that quotes nothing.
    """
    if not text:
        raise ValueError("is empty")
    if _CONTROL.search(text) or len(text.encode()) > MAX_BYTES:
        raise ValueError("is too long or holds a control character")
    if text.startswith("$share/"):
        raise ValueError("is a shared subscription, which would lose the order of readings")
    levels = text.split("/")
    captures: list[tuple[int, str]] = []
    for index, level in enumerate(levels):
        captured = _CAPTURE.fullmatch(level)
        if captured and STREAM_KEY.fullmatch(captured[1]):
            captures.append((index, captured[1]))
            levels[index] = "+"
        elif "{" in level or "}" in level:
            raise ValueError("has a brace that is not part of one {name} for a whole level")
        elif level != "+" and "+" in level:
            raise ValueError("has a + that does not take a whole level")
        elif "#" in level and (level != "#" or index != len(levels) - 1):
            raise ValueError("has a # that is not the whole of the last level")
    names = [name for _, name in captures]
    if len(set(names)) < len(names):
        raise ValueError("has one {name} twice")
    return Named("/".join(levels), tuple(captures))


def overlap(one: str, two: str) -> bool:
    """Whether some topic matches both filters."""
    first, second = one.split("/"), two.split("/")
    if first[0] in ("+", "#") and second[0].startswith("$"):
        return False  # a leading wildcard matches no topic of the server's own
    if second[0] in ("+", "#") and first[0].startswith("$"):
        return False
    for a, b in zip(first, second, strict=False):
        if "#" in (a, b):
            return True
        if a != b and "+" not in (a, b):
            return False
    # A last # matches its parent level too: a/# matches a.
    rest = first[len(second) :] or second[len(first) :]
    return rest in ([], ["#"])
