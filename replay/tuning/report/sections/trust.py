"""May I trust this recording? What was read, what was left out, baselines, wander.

Knows what makes a recording worth judging by. Must not know settings.
"""

from __future__ import annotations

from monitor.configuration import spans
from replay.tuning.ranking import has_interval
from replay.tuning.report import chosen, markup, words
from replay.tuning.report.charts import wander
from replay.tuning.report.markup import Text
from replay.tuning.result import Baseline, Grouping, Part, Result

_OPEN = 12


def render(result: Result) -> str:
    """The section's parts."""
    drawn = wander.chart(result)
    return "".join(
        (
            markup.paragraph(result.trust),
            markup.facts(_facts(result)),
            _baselines(result),
            markup.heading("Does the process keep to a centre?"),
            _groupings(result),
            markup.chart(drawn) if drawn else "",
        )
    )


def _facts(result: Result) -> list[tuple[str, Text]]:
    found = len(result.streams)
    names = "; ".join(words.stream_name(stream.stream) for stream in result.streams[:_OPEN])
    more = f" and {found - _OPEN:,} more" if found > _OPEN else ""
    left_out = ", ".join(f"{count:,} {reason}" for reason, count in result.set_aside)
    step = "none found" if result.resolution is None else f"{result.resolution:g} {result.unit}"
    return [
        ("Whole recording", _part(result.whole)),
        ("First part, fitted", _part(result.fit)),
        ("Last part, proved", _part(result.proof)),
        ("Streams", f"{found:,}: {names}{more}" if found > 1 else names),
        ("Set aside", left_out or "nothing"),
        ("Gauge's step", step.rstrip()),
    ]


def _part(part: Part) -> str:
    return (
        f"{words.moment(part.first)} to {words.moment(part.last)} UTC, "
        f"{spans.long(part.running)} running, {part.readings:,} readings"
    )


def _baselines(result: Result) -> str:
    grouping = chosen.grouping(result)
    if grouping is None:
        return ""
    unit = f", {result.unit}" if result.unit else ""
    columns = (
        "Stream",
        "Readings",
        f"Centre{unit}",
        f"Spread within{unit}",
        f"Spread between{unit}",
        "Centre in the last part",
    )
    rows = [
        _baseline(line, stream.readings)
        for line, stream in zip(grouping.baselines, result.streams, strict=True)
    ]
    caption = (
        f"Baseline of each stream from the first part ({grouping.said}), and where its centre was "
        "in the last part. Spreads are standard deviations: of single readings within a subgroup, "
        "and of subgroup means beyond that."
    )
    told = markup.heading("The baseline of each stream")
    told += markup.table(caption, columns, rows[: 2 * _OPEN])
    if len(rows) > 2 * _OPEN:
        rest = rows[2 * _OPEN :]
        title = f"{words.plural(len(rest), 'more stream')}"
        told += markup.fold(title, markup.table(f"Baselines: {title}", columns, rest))
    return told


def _baseline(line: Baseline, readings: int) -> tuple[Text, ...]:
    moved = line.mean_proof - line.mean
    whole = (line.sigma**2 + line.sigma_between**2) ** 0.5
    note = ""
    if abs(moved) >= 0.005 * whole > 0:
        way = "down" if moved < 0 else "up"
        note = f"{abs(moved) / whole:.2f} of the whole spread {way}"
    return (
        words.stream_name(line.stream),
        f"{readings:,}",
        words.level(line.mean, line.sigma),
        f"{line.sigma:.3g}",
        f"{line.sigma_between:.3g}",
        markup.with_note(words.level(line.mean_proof, line.sigma), note),
    )


def _groupings(result: Result) -> str:
    return markup.table(
        "Each way of gathering readings into subgroups, all streams together. Correlation is that "
        "of a subgroup's mean with the next one's: 0 where they are independent.",
        (
            "Readings gathered",
            "Subgroups fitted",
            "Subgroups proved",
            "Correlation",
            "Wander",
            "Longest interval it supports",
        ),
        (
            _grouping(grouping, has_interval(result, number))
            for number, grouping in enumerate(result.groupings)
        ),
    )


def _grouping(grouping: Grouping, told: bool) -> tuple[Text, ...]:
    kept = grouping.wander
    sign = "✗" if kept.wanders else "?" if kept.growth is None or kept.moved else "✓"
    return (
        grouping.said,
        f"{grouping.fit:,}",
        f"{grouping.proof:,}",
        f"{grouping.correlation:+.2f}",
        f"{sign} {wander.sentence(grouping)}",
        spans.long(grouping.supports) if told else "none",
    )
