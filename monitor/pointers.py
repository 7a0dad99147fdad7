"""JSON Pointer (RFC 6901): from text to tokens, and from tokens to a place in a document.

Knows the standard. Must not know what the values mean.
"""

from __future__ import annotations

import re
from typing import Final

MISSING: Final = object()
"""What ``lookup`` gives where the document has no such place."""

_INDEX = re.compile(r"0|[1-9][0-9]*", re.ASCII)
_ESCAPE = re.compile(r"~(?![01])")


def parse(text: str) -> tuple[str, ...]:
    """Reference tokens of a pointer; raises ValueError where the text is none."""
    if text == "":
        return ()
    if not text.startswith("/"):
        raise ValueError(f"{text!r} is not a JSON Pointer: it starts with /, as in /{text}")
    if _ESCAPE.search(text):
        raise ValueError(f"{text!r} is not a JSON Pointer: write ~ as ~0, and / in a name as ~1")
    return tuple(token.replace("~1", "/").replace("~0", "~") for token in text[1:].split("/"))


def lookup(document: object, tokens: tuple[str, ...]) -> object:
    """The value at ``tokens`` in a parsed JSON document, or ``MISSING``."""
    for token in tokens:
        if type(document) is dict:
            document = document.get(token, MISSING)
        elif type(document) is list and len(token) < 10 and _INDEX.fullmatch(token):
            index = int(token)
            document = document[index] if index < len(document) else MISSING
        else:
            return MISSING
    return document
