"""What was set aside of recordings, in words: why, how often, and where the first of it is.

Knows the reasons of the engine. Must not know which command asks.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from monitor.outputs import SetAside

_EXAMPLE = 100

REASONS = {
    "oversized": "larger than 256 KiB",
    "retained": "retained messages are old news",
    "no-topic": "no source of the configuration listens there",
    "not-json": "the payload is no JSON",
    "not-used": "left out by use_if",
    "no-stream": "a stream key is missing, or is neither text nor number",
    "no-value": "there is nothing where the value should be",
    "not-a-number": "the value is no number (with a decimal point: 341.7)",
    "not-finite": "the value is infinite or NaN",
    "implausible": "outside the plausible range",
    "no-time": "there is nothing where the time should be",
    "bad-time": "write ISO 8601 with its offset (…Z or …+01:00), or an epoch number",
    "future": "more than 5 min later than its arrival",
    "repeated": "the same reading again",
    "late": "older than the stream's newest reading",
}


def lines(counts: Mapping[str, int], first: Mapping[str, tuple[str, SetAside]]) -> Iterator[str]:
    """Two lines a reason, the most frequent first; ``first``: file and line of the first of each
    reason, and what it was."""
    for reason, count in sorted(counts.items(), key=lambda item: (-item[1], item[0])):
        where, example = first[reason]
        yield f"  {reason:<13} {count:>9,}  {REASONS.get(reason, '')}"
        yield f"  {'':<23}  first at {where}: {_shown(example)}"


def _shown(example: SetAside) -> str:
    text = example.payload.decode("utf-8", "backslashreplace")
    cut = repr(text if len(text) <= _EXAMPLE else text[:_EXAMPLE] + "…")
    return f"{example.topic or example.characteristic or 'a row'} {cut}"
