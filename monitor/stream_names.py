"""Streams as text: ``head=4;lane=1``, as the table of points and ``by_stream`` write them.

Knows that notation. Must not know which keys a characteristic has.
"""

from __future__ import annotations

import re
from urllib.parse import unquote

from monitor.filters import STREAM_KEY
from monitor.plan import Stream

_ENCODED = re.compile(r"(?:[^%]|%[0-9A-Fa-f]{2})*")


def name(stream: Stream) -> str:
    """``head=4;lane=1``, with ``;`` and ``%`` inside a value percent-encoded."""
    return ";".join(
        f"{key}={value.replace('%', '%25').replace(';', '%3B')}" for key, value in stream
    )


def parse(text: str) -> Stream:
    """The stream of that name; its keys may stand in any order, and any character be encoded.

    Raises ValueError where the text is no stream's: a predicate ("has one key twice").
    """
    values: dict[str, str] = {}
    for part in text.split(";"):
        key, equals, value = part.partition("=")
        if not equals or not STREAM_KEY.fullmatch(key):
            raise ValueError("is no stream")
        if not _ENCODED.fullmatch(value):
            raise ValueError("has a % without two hexadecimal digits")
        if key in values:
            raise ValueError("has one key twice")
        try:
            values[key] = unquote(value, errors="strict")
        except UnicodeDecodeError:
            raise ValueError("encodes what is not UTF-8") from None
    return tuple(sorted(values.items()))
