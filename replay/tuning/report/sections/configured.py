"""What do I put in my configuration? The text to copy.

Knows how to hand over a text. Must not know how it came about.
"""

from __future__ import annotations

from html import escape

from replay.tuning.report import chosen, markup
from replay.tuning.result import Result, Setting


def render(result: Result) -> str:
    """The section's parts."""
    best = chosen.best(result)
    if best is None or not result.fragment:
        return markup.paragraph(
            "Nothing from this recording: no setting can be recommended. Keep what runs now, and "
            "do what the section before this one says."
        )
    return (
        "".join(map(markup.paragraph, result.notes))
        + markup.paragraph("Then run driftbell check on the whole configuration.")
        + f'<pre id="fragment" tabindex="0" aria-label="Configuration to copy"><code>'
        f"{escape(result.fragment)}</code></pre>"
        '<p><button type="button" data-copies="fragment" hidden>Copy</button></p>' + _frozen(best)
    )


def _frozen(best: Setting) -> str:
    if best.origin == "configured":
        return ""
    return markup.paragraph(
        "A baseline freezes how the process ran in the first part, faults included. Let "
        "somebody who knows the line look at it before it is adopted.",
        "caution",
    )
