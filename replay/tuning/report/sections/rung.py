"""What would have rung? Every setting, what it promised and what it delivered.

Knows false alarms. Must not know delays beyond the one that ranks.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.configuration import spans
from replay.tuning.ranking import keeps, that_ranks
from replay.tuning.report import chosen, markup, words
from replay.tuning.report.charts import promised, streams
from replay.tuning.report.markup import Text
from replay.tuning.result import Result, Setting, Shown, Together

_WORDS = (
    "“By the tail” carries on how fast ever larger values of the setting's statistic become rarer; "
    "of a setting that rang 25 times or more it is the count itself. "
    "“Not shown” is no failure: this recording leaves it open. Limits worked out here are set "
    "wider on purpose, because the tail is known from this recording only; the figure of driftbell "
    "check is the textbook's."
)
_TODAY = (
    "All detectors together - those configured, and those that the fragment would put in their "
    "place, held against its baseline - are counted as the crew hears alerts: what several of them "
    "signal on one side of a stream is one alert until it is back to normal, and what comes after "
    "that rings again. Their interval by the tails adds up the rates of each, which is a little "
    "too often, since some of it rings together. A detector among others is asked for its part of "
    "the promise only, which is shared out as in the configuration."
)


def render(result: Result) -> str:
    """The section's parts."""
    few, rest = chosen.few(result), chosen.rest(result)
    if not result.settings:
        parts = [markup.paragraph("No setting was tried.")]
    else:
        parts = [
            markup.paragraph(_WORDS),
            *([] if result.together is None else [markup.paragraph(_TODAY)]),
            markup.table(
                _caption(result), _columns(result), _rows(chosen.with_wholes(result, few), result)
            ),
        ]
    if rest:
        title = words.plural(len(rest), "more setting")
        inner = markup.table(f"{title}, in order", _columns(result), _rows(rest, result))
        parts.append(markup.fold(title, inner))
    if any(setting.observed.interval or setting.extrapolated for setting in few):
        parts += [
            markup.heading("Promise against delivered"),
            markup.chart(promised.chart(result, chosen.with_wholes(result, few))),
        ]
    if result.streams:
        parts += [
            markup.heading("The streams, and when it would have rung"),
            markup.chart(streams.chart(result)),
        ]
    if result.events:
        shown = chosen.with_wholes(result, few)
        parts += [markup.heading("Your labelled events"), _events(shown, rest, result)]
    return "".join(parts)


def _caption(result: Result) -> str:
    return (
        f"Settings side by side, in the last part: {spans.long(result.proof.running)} of running "
        f"time, of which nothing was used to fit. Asked: one false alarm in "
        f"{spans.long(result.promise)}, all streams and detectors together. Ranked by how late "
        "they catch, among those that keep what is asked of them; those for the spread among "
        "themselves."
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


def _rows(shown: Sequence[Shown], result: Result) -> list[tuple[Text, ...]]:
    return [_row(each, result) for each in shown]


def _row(shown: Shown, result: Result) -> tuple[Text, ...]:
    return (
        markup.with_note(shown.name, _what(shown, result)),
        _keeps(shown, result),
        markup.with_note(f"{shown.observed.alarms:,}", f"in {spans.long(shown.observed.seconds)}"),
        markup.with_note(*words.counted(shown.observed)),
        markup.with_note(*words.by_tail(shown)),
        _late(shown, result),
    )


def _what(shown: Shown, result: Result) -> str:
    if isinstance(shown, Together):
        return words.whole(shown, result)
    return words.purpose(shown, result.groupings[shown.grouping], result.unit)


def _keeps(shown: Shown, result: Result) -> Text:
    asked = "" if shown.asked == result.promise else f"asked: one in {spans.long(shown.asked)}"
    word = {"yes": "✓ yes", "no": "✗ no", "not shown": "? not shown"}[keeps(shown)]
    if isinstance(shown, Together):
        return markup.with_note(word, asked)
    if shown.rank is None:
        word += ", not ranked" if keeps(shown) == "yes" else ""
        return markup.with_note(word, "; ".join(filter(None, (shown.unranked, asked))))
    if shown in (chosen.best(result), chosen.best_spread(result)):
        word += ", take it"
    rank = f"rank {shown.rank}" + (" for the spread" if shown.of_spread else "")
    return markup.with_note(word, "; ".join(filter(None, (rank, asked))))


def _late(shown: Shown, result: Result) -> Text:
    if isinstance(shown, Setting) and shown.of_spread:
        delay = that_ranks(shown, result.catch[0])
        if delay is not None:
            told, _ = words.delay(delay, late=True)
            return markup.with_note(told, f"of {words.drift(delay, result)}")
    delay = chosen.first_step(shown, result)
    return "not measured" if delay is None else markup.with_note(*words.delay(delay, late=True))


def _events(few: Sequence[Shown], rest: Sequence[Setting], result: Result) -> str:
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


def _event_rows(settings: Sequence[Shown]) -> list[tuple[Text, ...]]:
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
