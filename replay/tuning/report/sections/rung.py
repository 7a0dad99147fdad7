"""What would have rung? Every setting, what it promised and what it delivered.

Knows false alarms. Must not know delays beyond the one that ranks.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.configuration import spans
from replay.tuning.ranking import keeps
from replay.tuning.report import chosen, markup, words
from replay.tuning.report.charts import promised, streams
from replay.tuning.report.markup import Text
from replay.tuning.result import Result, Setting

_WORDS = (
    "“By the tail” carries on how fast ever larger values of the setting's statistic become rarer. "
    "“Not shown” is no failure: this recording leaves it open. Limits worked out here are set "
    "wider on purpose, because the tail is known from this recording only; the figure of driftbell "
    "check is the textbook's."
)


def render(result: Result) -> str:
    """The section's parts."""
    few, rest = chosen.few(result), chosen.rest(result)
    if not result.settings:
        parts = [markup.paragraph("No setting was tried.")]
    else:
        parts = [
            markup.paragraph(_WORDS),
            markup.table(_caption(result), _columns(result), _rows(few, result)),
        ]
    if rest:
        title = words.plural(len(rest), "more setting")
        inner = markup.table(f"{title}, in order", _columns(result), _rows(rest, result))
        parts.append(markup.fold(title, inner))
    if any(setting.observed.interval or setting.extrapolated for setting in few):
        parts += [
            markup.heading("Promise against delivered"),
            markup.chart(promised.chart(result, few)),
        ]
    if result.streams:
        parts += [
            markup.heading("The streams, and when it would have rung"),
            markup.chart(streams.chart(result)),
        ]
    if result.events:
        parts += [markup.heading("Your labelled events"), _events(few, rest, result)]
    return "".join(parts)


def _caption(result: Result) -> str:
    return (
        f"Settings side by side, in the last part: {spans.long(result.proof.running)} of running "
        f"time, of which nothing was used to fit. Asked: one false alarm in "
        f"{spans.long(result.promise)}, all streams together. Ranked by how late they catch, among "
        "those that keep the promise."
    )


def _columns(result: Result) -> tuple[str, ...]:
    size = words.amount(result.catch[0], result.unit) if result.catch else "the drift"
    return (
        "Setting",
        "Keeps the promise?",
        "False alarms seen",
        "Once in, counted",
        "Once in, by the tail",
        f"Nine in ten at {size}",
    )


def _rows(settings: Sequence[Setting], result: Result) -> list[tuple[Text, ...]]:
    return [_row(setting, result) for setting in settings]


def _row(setting: Setting, result: Result) -> tuple[Text, ...]:
    what = words.purpose(setting, result.groupings[setting.grouping], result.unit)
    return (
        markup.with_note(setting.name, what),
        _keeps(setting, result),
        markup.with_note(
            f"{setting.observed.alarms:,}", f"in {spans.long(setting.observed.seconds)}"
        ),
        markup.with_note(*words.counted(setting.observed)),
        markup.with_note(*words.by_tail(setting)),
        _late(setting, result),
    )


def _keeps(setting: Setting, result: Result) -> Text:
    if setting is chosen.best(result):
        return markup.with_note("✓ yes, take it", f"rank {setting.rank}")
    if setting.rank is not None:
        return markup.with_note("✓ yes", f"rank {setting.rank}")
    word = {"yes": "✓ yes, not ranked", "no": "✗ no", "not shown": "? not shown"}
    return markup.with_note(word[keeps(setting, result.promise)], setting.unranked)


def _late(setting: Setting, result: Result) -> Text:
    delay = chosen.first_step(setting, result)
    return "not measured" if delay is None else markup.with_note(*words.delay(delay, late=True))


def _events(few: Sequence[Setting], rest: Sequence[Setting], result: Result) -> str:
    columns = (
        "Setting",
        "Real causes caught",
        "Half of those within",
        "Nine in ten within",
        "False alarms avoided",
    )
    caption = (
        f"{words.plural(result.events, 'labelled event')} of the whole recording, the first part "
        "included: how many real causes each setting would have signalled, and how many alarms "
        "that the crew called false it would not have rung."
    )
    told = markup.table(caption, columns, _event_rows(few))
    if rows := _event_rows(rest):
        title = f"{words.plural(len(rows), 'more setting')} on the events"
        told += markup.fold(title, markup.table(title, columns, rows))
    return told


def _event_rows(settings: Sequence[Setting]) -> list[tuple[Text, ...]]:
    def told(seconds: float | None) -> str:
        return "–" if seconds is None else spans.long(seconds)

    return [
        (
            setting.name,
            f"{score.caught:,} of {score.causes:,}",
            told(score.median_seconds),
            told(score.late_seconds),
            f"{score.avoided:,} of {score.false_verdicts:,}",
        )
        for setting in settings
        if (score := setting.events) is not None
    ]
