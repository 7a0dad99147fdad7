"""What was refused, and why? And what to do instead.

Knows refusals. Must not know how they were decided.
"""

from __future__ import annotations

from replay.tuning.report import markup, words
from replay.tuning.result import Result

_NAMED = 3


def render(result: Result) -> str:
    """The section's parts."""
    if result.refusals:
        told = markup.table(
            "What this recording cannot support",
            ("Refused", "Why", "Instead"),
            (
                tuple(map(words.begun, (refusal.what, refusal.why, refusal.instead)))
                for refusal in result.refusals
            ),
        )
    else:
        told = markup.paragraph("Nothing that was asked for was refused.")
    reasons: dict[str, list[str]] = {}
    for setting in result.settings:
        if setting.unranked:
            reasons.setdefault(setting.unranked, []).append(setting.name)
    if reasons:
        told += markup.table(
            "Settings that were compared but not ranked, by reason",
            ("Why", "How many", "Which"),
            (
                (words.begun(reason), f"{len(names):,}", _some(names))
                for reason, names in reasons.items()
            ),
        )
    return told


def _some(names: list[str]) -> str:
    told = ", ".join(names[:_NAMED])
    more = len(names) - _NAMED
    return f"{told} and {words.plural(more, 'other')}" if more > 0 else told
