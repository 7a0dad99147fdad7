"""What a play found, in words, for the person who tunes.

It answers, in this order: was everything read, and which time does it cover? What was not used,
why, and where is one? Did every stream get its subgroups? What rang, by which rule, how often? What
did the alerts say? Knows ``Played``. Must not know files or the engine.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence

from monitor import times
from monitor.outputs import SetAside
from monitor.times import SECOND
from replay.play import Played

_STREAMS = 40
_EXAMPLE = 100

_REASONS = {
    "oversized": "larger than 256 KiB",
    "retained": "retained messages are old news",
    "no-topic": "no source of the configuration listens there",
    "not-json": "the payload is no JSON",
    "not-used": "left out by use_if",
    "no-stream": "a stream key is missing, or is neither text nor number",
    "no-value": "there is nothing where the value should be",
    "not-a-number": "the value is no number",
    "not-finite": "the value is infinite or NaN",
    "implausible": "outside the plausible range",
    "no-time": "there is nothing where the time should be",
    "bad-time": "write ISO 8601 with its offset (…Z or …+01:00), or an epoch number",
    "future": "more than 5 min later than its arrival",
    "repeated": "the same reading again",
    "late": "older than the stream's newest reading",
}


def summary(played: Played, noun: str) -> str:
    """Several lines; ``noun`` is what the recordings held: messages or rows."""
    parts = [
        "\n".join(part)
        for part in (
            list(_read(played, noun)),
            list(_streams(played)),
            list(_rules(played)),
            list(_events(played)),
        )
        if part
    ]
    return "".join(c if c == "\n" or c.isprintable() else "�" for c in "\n\n".join(parts) + "\n")


def _read(played: Played, noun: str) -> Iterator[str]:
    counts = played.counts
    span = ""
    if played.first is not None and played.last is not None:
        first, last = _clock(played.first), _clock(played.last)
        span = f", {first} to {last} ({_length(played.last - played.first)})"
    yield f"Read {counts.messages:,} {noun} in {played.seconds:.1f} s{span}."
    if played.backwards:
        yield (
            f"  {played.backwards:,} arrived before one recorded earlier, first at "
            f"{played.backwards_at}: is the recording in order?"
        )
    aside = sum(counts.set_aside.values())
    yield f"Used {counts.readings:,} readings; set aside {aside:,}{':' if aside else '.'}"
    by_size = sorted(counts.set_aside.items(), key=lambda item: (-item[1], item[0]))
    for reason, count in by_size:
        where, example = played.set_aside_at[reason]
        yield f"  {reason:<13} {count:>9,}  {_REASONS.get(reason, '')}"
        yield f"  {'':<23}  first at {where}: {_shown(example)}"
    if played.unreadable:
        yield f"Unreadable lines: {played.unreadable:,} (named on stderr)."
    gaps = f"; {counts.missing:,} numbers of the sequence are missing" if counts.missing else ""
    yield f"Subgroups {counts.subgroups:,}; {counts.abandoned:,} abandoned{gaps}."


def _streams(played: Played) -> Iterator[str]:
    alerts: Counter[tuple[str, str]] = Counter()
    for (characteristic, stream, _, _), count in played.raised.items():
        alerts[characteristic, stream] += count
    rows = [
        (characteristic, stream or "-", f"{subgroups:,}", f"{alerts[characteristic, stream]:,}")
        for characteristic, stream, subgroups in played.streams
    ]
    if rows:
        yield from _table(("characteristic", "stream", "subgroups", "alerts"), rows[:_STREAMS])
    if len(rows) > _STREAMS:
        yield f"  … and {len(rows) - _STREAMS:,} more streams"
    if played.unread:
        yield f"  No reading of {', '.join(played.unread)} was used."


def _rules(played: Played) -> Iterator[str]:
    raised = sum(played.raised.values())
    signals = f"{played.counts.signals:,} signals"
    if not raised:
        yield f"No alert was raised; {signals}."
        return
    every = ""
    if played.first is not None and played.last is not None and played.last > played.first:
        each = (played.last - played.first) // raised
        every = f", one in {_length(each)}"
    yield f"Alerts raised: {raised:,}{every}; {signals}. They were raised by:"
    by_rule: Counter[tuple[str, str, str]] = Counter()
    for (characteristic, _, detector, rule), count in played.raised.items():
        by_rule[characteristic, detector, rule] += count
    rows = [(*key, f"{count:,}") for key, count in by_rule.most_common()]
    yield from _table(("characteristic", "detector", "rule", "alerts"), rows)


def _events(played: Played) -> Iterator[str]:
    for event in played.events:
        yield f"{event['time']}  {event['event']:<18}  {event['text']}"
    more = played.counts.alerts - len(played.events)
    if more > 0:
        yield f"… and {more:,} more events: --alerts FILE.jsonl keeps them all"


def _table(header: tuple[str, ...], rows: Sequence[tuple[str, ...]]) -> Iterator[str]:
    widths = [max(map(len, column)) for column in zip(header, *rows, strict=True)]
    for row in (header, *rows):
        cells = [
            cell.rjust(width) if title in ("subgroups", "alerts") else cell.ljust(width)
            for title, cell, width in zip(header, row, widths, strict=True)
        ]
        yield "  " + "  ".join(cells).rstrip()


def _shown(example: SetAside) -> str:
    text = example.payload.decode("utf-8", "backslashreplace")
    cut = repr(text if len(text) <= _EXAMPLE else text[:_EXAMPLE] + "…")
    return f"{example.topic or example.characteristic or 'a row'} {cut}"


def _clock(moment: int) -> str:
    return times.format_time(moment - moment % SECOND)[:19].replace("T", " ") + "Z"


def _length(microseconds: int) -> str:
    """A length of time in its two largest units."""
    seconds = microseconds / SECOND
    if seconds < 60:
        return f"{seconds:.3g} s"
    minutes = int(seconds // 60)
    if minutes < 60:
        return f"{minutes} min {int(seconds % 60)} s"
    hours = minutes // 60
    if hours < 48:
        return f"{hours} h {minutes % 60} min"
    return f"{hours // 24} d {hours % 24} h"
