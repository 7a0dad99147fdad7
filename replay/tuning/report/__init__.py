"""The report of ``tune`` as one HTML page that needs nothing from outside itself.

Knows that its charts need plotly. Must not know how a figure was worked out.
"""

from __future__ import annotations

from importlib.util import find_spec

from monitor.commandline import CommandError
from replay.tuning.result import Result


def require_plotly() -> None:
    """Raise CommandError where plotly is not installed: better before long work than after it."""
    if find_spec("plotly") is None:
        raise CommandError(
            "the HTML report draws its charts with plotly, which is not installed: "
            "pip install 'driftbell[report]' adds it; without --html the answer needs no plotly"
        )


def page(result: Result) -> str:
    """The whole page. Raises CommandError where plotly is not installed."""
    require_plotly()
    # Only here: importing the sections imports plotly, which a plain install does without.
    from replay.tuning.report.document import document

    return document(result)
