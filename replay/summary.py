"""What a play found, in words, for the person who tunes.

It answers, in this order: was everything read, and which time does it cover? What was not used,
why, and where is one? Did every stream get its subgroups? Which of them were judged, and why not
the others? What rang, by which rule, how often? What did the alerts say? Knows ``Played``. Must not
know files or the engine.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence

from monitor import times
from monitor.times import SECOND
from replay import set_aside_words
from replay.play import Played, PlayedStream

_STREAMS = 40
_WHYS = 6


def summary(played: Played, noun: str) -> str:
    """Several lines; ``noun`` is what the recordings held: messages or rows."""
    parts = [
        "\n".join(part)
        for part in (
            list(_read(played, noun)),
            list(_streams(played)),
            list(_unjudged(played)),
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
    yield from set_aside_words.lines(counts.set_aside, played.set_aside_at)
    if played.unreadable:
        yield f"Unreadable lines: {played.unreadable:,} (named on stderr)."
    gaps = f"; {counts.missing:,} numbers of the sequence are missing" if counts.missing else ""
    yield f"Subgroups {counts.subgroups:,}; {counts.abandoned:,} abandoned{gaps}."


def _streams(played: Played) -> Iterator[str]:
    alerts: Counter[tuple[str, str]] = Counter()
    for (characteristic, stream, _, _), count in played.raised.items():
        alerts[characteristic, stream] += count
    rows = [
        (
            each.characteristic,
            each.stream or "-",
            f"{each.subgroups:,}",
            f"{alerts[each.characteristic, each.stream]:,}",
        )
        for each in played.streams
    ]
    if rows:
        yield from _table(("characteristic", "stream", "subgroups", "alerts"), rows[:_STREAMS])
    if len(rows) > _STREAMS:
        yield f"  … and {len(rows) - _STREAMS:,} more streams"
    if played.unread:
        yield f"  No reading of {', '.join(played.unread)} was used."


def _unjudged(played: Played) -> Iterator[str]:
    """Silence of what nobody judged is no good news."""
    by_name: dict[str, list[PlayedStream]] = {}
    for each in played.streams:
        by_name.setdefault(each.characteristic, []).append(each)
    for name, streams in by_name.items():
        total = sum(each.subgroups for each in streams)
        judged = sum(each.judged for each in streams)
        adopted = [each.adopted for each in streams if each.adopted is not None]
        if judged == total and not adopted:
            continue
        part = "none" if not judged else f"{judged:,}"
        yield f"{name}: {part} of {total:,} subgroups {'were' if judged > 1 else 'was'} judged."
        if adopted:
            first, last = _clock(min(adopted)), _clock(max(adopted))
            when = f"at {first}" if first == last else f"from {first} to {last}"
            yield (
                f"  a baseline was learned and adopted for {len(adopted):,} of "
                f"{_counted(len(streams), 'stream')}, {when}"
            )
        whys: dict[str, list[str]] = {}
        for each in streams:
            if each.why is not None:
                whys.setdefault(each.why, []).append(each.stream)
        for why, names in list(whys.items())[:_WHYS]:
            whose = "" if len(names) == len(streams) else f"{_named(names)}: "
            yield f"  {whose}{why}"
        more = sum(map(len, list(whys.values())[_WHYS:]))
        if more:
            yield f"  … and {_counted(more, 'more stream')} not judged (--json has them all)"


def _named(streams: Sequence[str]) -> str:
    return streams[0] if len(streams) == 1 else f"{streams[0]} and {len(streams) - 1:,} more"


def _counted(count: int, noun: str) -> str:
    return f"{count:,} {noun}" if count == 1 else f"{count:,} {noun}s"


def _rules(played: Played) -> Iterator[str]:
    raised = sum(played.raised.values())
    signals = f"{played.counts.signals:,} signals"
    judged = sum(each.judged for each in played.streams)
    if not judged:
        yield "No alert could be raised: no subgroup was judged."
        return
    if not raised:
        among = "" if judged == played.counts.subgroups else f" by the {judged:,} that were judged"
        yield f"No alert was raised{among}; {signals}."
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
