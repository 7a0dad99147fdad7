"""The page, in the order of its reader's questions.

Knows the order. Must not know what any answer contains.

Somebody who looks after a line opens it to decide on a setting. Their questions:

0. What is the answer?                   -> sections/summary
1. May I trust this recording?           -> sections/trust
2. What would have rung?                 -> sections/rung
3. How late?                             -> sections/late
4. What was refused, and why?            -> sections/refused
5. What do I put in my configuration?    -> sections/configured
6. How was this worked out?              -> sections/worked
"""

from __future__ import annotations

from html import escape

from plotly.offline import get_plotlyjs

from replay.tuning.report import markup
from replay.tuning.report.script import SCRIPT
from replay.tuning.report.sections import (
    configured,
    late,
    refused,
    rung,
    summary,
    trust,
    worked,
)
from replay.tuning.report.style import STYLE
from replay.tuning.result import Result

_QUESTIONS = (
    ("trust", "May I trust this recording?", trust.render),
    ("rung", "What would have rung?", rung.render),
    ("late", "How late?", late.render),
    ("refused", "What was refused, and why?", refused.render),
    ("configuration", "What do I put in my configuration?", configured.render),
    ("worked", "How was this worked out?", worked.render),
)

# The page must work from a stick in a plant: its own rule forbids it to fetch anything.
_POLICY = (
    "default-src 'none'; script-src 'unsafe-inline'; style-src 'unsafe-inline'; "
    "img-src data: blob:; base-uri 'none'; form-action 'none'"
)


def document(result: Result) -> str:
    """The whole page, with its script and style in it."""
    questions = [(name, question) for name, question, _ in _QUESTIONS]
    sections = "".join(
        markup.section(name, f"{number}. {question}", render(result))
        for number, (name, question, render) in enumerate(_QUESTIONS, 1)
    )
    title = escape(f"{result.title or result.characteristic}: which setting?")
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        f'<meta http-equiv="Content-Security-Policy" content="{_POLICY}">'
        f'<title>{title}</title><meta name="viewport" content="width=device-width, '
        f'initial-scale=1"><style>{STYLE}</style></head>\n'
        f"<body>{summary.render(result, questions)}\n<main>{sections}</main>\n"
        "<noscript><p>The charts need a browser that runs scripts; their figures stand in the "
        "tables.</p></noscript>\n"
        f"<script>{get_plotlyjs()}</script>\n<script>{SCRIPT}</script></body></html>\n"
    )
