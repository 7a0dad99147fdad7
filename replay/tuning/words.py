"""A result on a terminal, in the order of its reader's questions.

Knows plain words and how many digits are worth showing. Must not know how a figure was worked out.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Sequence

from monitor.configuration import spans
from monitor.times import format_time
from replay.tuning.ranking import at_catch, has_interval, keeps
from replay.tuning.result import Delay, Grouping, Quantile, Range, Result, Setting
from replay.tuning.verdict import longer

_WIDTH = 96
_ROWS = 12
_CLIP = (
    " Clip: what lies further out counts as so many standard errors, so that one wild reading "
    "cannot ring by itself."
)


def lines(result: Result) -> Iterator[str]:
    """May I trust it, what would have rung, how late, what was refused, what do I write down?"""
    name = f"{result.title} ({result.unit})" if result.unit else result.title
    yield name
    yield ""
    yield from _section("May I trust this recording?")
    yield from _trust(result)
    yield ""
    shown = _shown(result)
    left = len(result.settings) - len(shown)
    yield from _section("What would have rung with nothing wrong?")
    yield from _wrapped(
        f"Asked: one false alarm in {spans.long(result.promise)}, all streams together, each "
        "setting being the only detector. Seen: counted in the last "
        f"{spans.long(result.proof.running)}; one in: by the statistic's tail there (how fast ever "
        "larger values of it become rarer, carried on), from - to with 90 %. Not shown: this "
        "recording leaves it open. Limits worked out here are set wider on purpose, because the "
        "tail is known from this recording only; the figure of check is the textbook's."
        f"{_CLIP if _clips(shown) else ''}"
    )
    yield from _aligned(_alarms(result, shown))
    if left:
        yield f"… and {left} more setting{'s' if left > 1 else ''}: --json has them all"
    yield ""
    yield from _section("How late would it catch a drift?")
    if any(each.delays for each in result.settings):
        yield from _wrapped(_about_delays(result))
        yield from _aligned(_delays(result, shown))
    else:
        yield "This recording is too short to tell."
    yield ""
    if result.events:
        yield from _section("What of the labelled events?")
        yield from _aligned(_events(shown))
        yield ""
    if result.refusals:
        yield from _section("What was refused, and why?")
        for each in result.refusals:
            yield from _wrapped(f"{each.what}: {each.why}. Instead: {each.instead}.", "- ")
        yield ""
    yield from _section("What do I put into the configuration?")
    if result.best is None:
        yield from _wrapped(_nothing(result))
    else:
        for note in result.notes:
            yield from _wrapped(note)
        yield ""
        yield from result.fragment.rstrip().splitlines()


def commented(result: Result) -> str:
    """The fragment as a file: what it replaces and keeps stands above it, as comments."""
    told = [f"# {line}" for note in result.notes for line in _wrapped(note)]
    return "\n".join((*told, result.fragment))


def _section(question: str) -> Iterator[str]:
    yield question
    yield "-" * len(question)


def _wrapped(text: str, bullet: str = "") -> list[str]:
    return textwrap.wrap(text, _WIDTH, initial_indent=bullet, subsequent_indent=" " * len(bullet))


def _trust(result: Result) -> Iterator[str]:
    yield from _wrapped(result.trust)
    whole = result.whole
    streams = len(result.streams)
    aside = sum(count for _, count in result.set_aside)
    yield from _wrapped(
        f"{whole.readings:,} readings of {streams} stream{'s' if streams > 1 else ''} from "
        f"{format_time(whole.first)} to {format_time(whole.last)}, "
        f"{spans.long(whole.running)} of it running; {aside:,} set aside. "
        f"Settings were fitted on the first {spans.long(result.fit.running)} and are proved on the "
        f"last {spans.long(result.proof.running)}."
    )
    for number, each in enumerate(result.groupings):
        yield from _wrapped(_grouping(each, has_interval(result, number)), "- ")
    yield from _wrapped(
        "A process wanders where its mean itself moves on and on, so that one part of a recording "
        "does not foretell the next: then means of 200 subgroups vary more, for their length, than "
        "means of 50, by the factor in brackets."
    )


def _grouping(found: Grouping, told: bool) -> str:
    if found.wander.growth is None:
        wander = "too few to see whether the process wanders"
    elif found.wander.wanders:
        wander = f"the process wanders ({found.wander.growth:.2g}, limit {found.wander.limit:g})"
    else:
        wander = f"no wander ({found.wander.growth:.2g}, limit {found.wander.limit:g})"
    most = f"at most {spans.long(found.supports)} can be told" if told else "nothing can be told"
    return (
        f"{found.said}: {found.fit:,} and {found.proof:,} subgroups; neighbours correlate "
        f"{found.correlation:.2f}; {wander}; {most}"
    )


def _shown(result: Result) -> list[Setting]:
    """The best, and every one that somebody wrote down."""
    shown = list(result.settings[:_ROWS])
    shown += [s for s in result.settings[_ROWS:] if s.origin == "configured"]
    return shown


def _alarms(result: Result, shown: Sequence[Setting]) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [("", "setting", "constants", "seen", "one in", "keeps it")]
    rows += [
        (
            "" if each.rank is None else f"{each.rank}.",
            each.name,
            ", ".join(f"{key} {value:g}" for key, value in each.constants),
            f"{each.observed.alarms:,}",
            _interval(each),
            keeps(each, result.promise),
        )
        for each in shown
    ]
    return rows


def _clips(shown: Sequence[Setting]) -> bool:
    return any(key == "clip" for each in shown for key, _ in each.constants)


def _interval(found: Setting) -> str:
    if found.extrapolated is not None:
        return _range(found.extrapolated.interval)
    if found.observed.interval is not None:
        return f"{_range(found.observed.interval)} (counted)"
    return "not told"


def _range(found: Range) -> str:
    if found.high is None:
        return f"at least {spans.long(found.low)}"
    low, high = spans.long(found.low), spans.long(found.high)
    if low.split()[-1] == high.split()[-1] and " " in low:
        low = low.rsplit(" ", 1)[0]
    return f"{low} - {high}"


def _about_delays(result: Result) -> str:
    unit = f" {result.unit}" if result.unit else ""
    drift = f"{result.catch[0]:g}{unit}"
    setting = next(iter(result.settings), None)
    delay = None if setting is None else at_catch(setting, result.catch[0])
    count = f"at {delay.onsets} places " if delay else ""
    return (
        f"Put into readings of the last part {count}- a step of {drift}, a ramp to {drift} over "
        f"{result.ramp} readings, a spread {result.ratio:g} times as large. Half and nine in ten "
        "(from - to with 90 %) are caught within so many pieces of the drifting stream, or so "
        "long: this is a step's unless another is named. "
        "Floor: the average of the best CUSUM for that step in the textbook's world."
    )


def _delays(result: Result, shown: Sequence[Setting]) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [
        ("", "setting", "half", "nine in ten", "in time", "floor", "ramp", "spread")
    ]
    for each in shown:
        step = at_catch(each, result.catch[0])
        ramp = next((d for d in each.delays if d.shape == "ramp"), None)
        spread = next((d for d in each.delays if d.shape == "spread"), None)
        rows.append(
            (
                "" if each.rank is None else f"{each.rank}.",
                each.name,
                "" if step is None else _pieces(step.median_readings, step),
                "" if step is None else _with_range(step.late_readings, step),
                "" if step is None else _time(step.late_seconds),
                "" if step is None or step.floor_readings is None else f"{step.floor_readings:.0f}",
                "" if ramp is None else _pieces(ramp.late_readings, ramp),
                "" if spread is None else _pieces(spread.late_readings, spread),
            )
        )
    return rows


def _pieces(found: Quantile, delay: Delay) -> str:
    return f"over {delay.horizon:,}" if found.value is None else f"{found.value:,.0f}"


def _with_range(found: Quantile, delay: Delay) -> str:
    if found.interval is None:
        return _pieces(found, delay)
    high = "…" if found.interval.high is None else f"{found.interval.high:,.0f}"
    return f"{found.value:,.0f} ({found.interval.low:,.0f} - {high})"


def _time(found: Quantile) -> str:
    return "" if found.value is None else spans.long(found.value)


def _events(shown: Sequence[Setting]) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [("", "setting", "causes caught", "half", "avoided false")]
    for each in shown:
        score = each.events
        if score is None:
            continue
        half = "" if score.median_seconds is None else spans.long(score.median_seconds)
        rows.append(
            (
                "" if each.rank is None else f"{each.rank}.",
                each.name,
                f"{score.caught} of {score.causes}",
                half,
                f"{score.avoided} of {score.false_verdicts}",
            )
        )
    return rows


def _nothing(result: Result) -> str:
    if not result.trusted:
        return "Nothing yet: this recording cannot say how often a setting would ring."
    said = "Nothing yet: no setting is shown to keep the promise and to catch nine drifts in ten. "
    able = [each for each in result.settings if each.extrapolated and _catches(each, result)]
    if able:
        longest = max(able, key=_shown_to_keep)
        said += (
            f"The longest interval shown of one that does catch them is "
            f"{spans.long(_shown_to_keep(longest))}, of {longest.name}. "
        )
    more = longer(result.promise, result.whole.running)
    return f"{said}Promise less, catch a larger drift, or {more}."


def _catches(found: Setting, result: Result) -> bool:
    delay = at_catch(found, result.catch[0])
    return delay is not None and delay.late_readings.value is not None


def _shown_to_keep(found: Setting) -> float:
    return 0.0 if found.extrapolated is None else found.extrapolated.interval.low


def _aligned(rows: Sequence[tuple[str, ...]]) -> Iterator[str]:
    """In columns of equal width: names and constants to the left, figures to the right."""
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for row in rows:
        cells = [
            cell.ljust(width)
            if place in (1,) or rows[0][place] == "constants"
            else cell.rjust(width)
            for place, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        yield "  ".join(cells).rstrip()
