"""How was this worked out? The small print, enough to do it again.

Knows what a second person needs to repeat and to doubt it. Must not know results beyond the tails.
"""

from __future__ import annotations

from replay.tuning.report import chosen, markup, words
from replay.tuning.report.charts import tails
from replay.tuning.report.markup import Html, Text
from replay.tuning.result import Result

_TAILS = 4


def render(result: Result) -> str:
    """The section's parts."""
    return (
        markup.facts(_facts(result))
        + markup.heading("The tails")
        + _tails(result)
        + markup.table(
            "Recordings that were read",
            ("File", "SHA-256"),
            (
                (source.name, Html(f"<code>{markup.inline(source.sha256)}</code>"))
                for source in result.sources
            ),
        )
    )


def _facts(result: Result) -> list[tuple[str, Text]]:
    clips = sorted({value for s in result.settings for key, value in s.constants if key == "clip"})
    told: list[tuple[str, Text]] = [
        (
            "Split",
            "By time: constants and baselines come from the first part only, every figure of this "
            "report from the last part; a gap lies between them, so that neither knows the other.",
        ),
        (
            "Counted interval",
            "From the number of false alarms in the last part (Poisson). With none seen: at least "
            "a third of the time, at 95 %.",
        ),
        (
            "Interval by the tail",
            "The largest values of the statistic between its returns to rest, all streams pooled, "
            "with an exponential tail carried on to the limit. It is refused beyond 50 times the "
            "recording, and wherever the process wanders.",
        ),
        (
            "Parts of the promise",
            "The promise is of all detectors together. A setting that joins others is asked for "
            "its share of it, by the shares of the detectors it replaces and of those that stay.",
        ),
        (
            "All together",
            "What is configured now ran through the engine itself, alerts, their return to normal "
            "and all. Time in which an alert was open is left out, since nothing more can ring in "
            "it. Lower end of the interval: rates added up; upper end: that of the detector which "
            "rings most.",
        ),
        (
            "Drifts",
            f"Put into readings, not into means. Sizes to catch: "
            f"{', '.join(words.amount(size, result.unit) for size in result.catch) or 'none'}; "
            f"a ramp grows over {result.ramp:,} readings of a stream; the spread grows by a factor "
            f"of {result.ratio:g}.",
        ),
        ("Seed", f"{result.seed}: the same recording and seed give the same report."),
    ]
    if clips:
        bounds = ", ".join(f"{clip:g}" for clip in clips)
        why = "so that one wild reading cannot ring by itself"
        said = f"Where a setting says so, its inputs end at ±{bounds} standard errors, {why}."
        told.insert(len(told) - 1, ("Clip", said))
    return told


def _tails(result: Result) -> str:
    drawn: list[str] = []
    for setting in chosen.few(result):
        grouping = result.groupings[setting.grouping]
        found = tails.chart(len(drawn), setting, grouping)
        if found is not None and len(drawn) < _TAILS:
            drawn.append(markup.chart(found))
    if not drawn:
        return markup.paragraph("No tail was fitted.")
    return (
        markup.paragraph(
            "Each point is a level and the share of subgroups that reached it. The line was fitted "
            "to the largest ones and carried on to the limit (dotted). It should follow the "
            "points, and cross the limit below what the promise allows (dashed). Where points "
            "bend away from the line, trust the counted interval, not this one."
        )
        + f'<div class="pair">{"".join(drawn)}</div>'
    )
