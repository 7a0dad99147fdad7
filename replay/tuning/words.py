"""A result on a terminal, in the order of its reader's questions.

Knows plain words. Must not know which rows a table has, or how a figure was worked out.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from monitor.configuration import spans
from monitor.times import format_time
from replay.tuning import rows
from replay.tuning.layout import paragraph, table
from replay.tuning.ranking import at_catch, has_interval
from replay.tuning.result import (
    Grouping,
    Result,
    Setting,
    Together,
)
from replay.tuning.verdict import longer

WIDTH = 96
_CLIP = (
    " Clip: what lies further out counts as so many standard errors, so that one wild reading "
    "cannot ring by itself."
)


def lines(result: Result, width: int = WIDTH) -> Iterator[str]:
    """May I trust it, what would have rung, how late, what was refused, what do I write down?

    ``width`` is that of the terminal, in columns.
    """
    name = f"{result.title} ({result.unit})" if result.unit else result.title
    yield name
    yield ""
    yield from _section("May I trust this recording?")
    yield from _trust(result, width)
    yield ""
    shown = rows.shown(result)
    left = len(result.settings) - len(shown)
    yield from _section("What would have rung with nothing wrong?")
    yield from paragraph(
        f"Asked: one false alarm in {spans.long(result.promise)}, all streams and detectors "
        "together; of one detector its part of that. Seen: counted in the last "
        f"{spans.long(result.proof.running)}; one in: by the statistic's tail there (how fast ever "
        "larger values of it become rarer, carried on), from - to with 90 %. Not shown: this "
        "recording leaves it open. Limits worked out here are set wider on purpose, because the "
        "tail is known from this recording only; the figure of check is the textbook's."
        f"{_CLIP if _clips(shown) else ''}",
        width,
    )
    if result.together is not None:
        yield from paragraph(_about_together(result.together), width)
    if result.proposed is not None:
        yield from paragraph(
            f"{rows.NEW}: {result.proposed.name} ({', '.join(result.proposed.detectors)}), held "
            "against its baseline and counted alike.",
            width,
        )
    yield from table(rows.alarms(result, shown), width)
    if left:
        yield f"… and {left} more setting{'s' if left > 1 else ''}: --json has them all"
    yield ""
    yield from _section("How late would it catch a drift?")
    if any(each.delays for each in result.settings):
        yield from paragraph(_about_delays(result), width)
        yield from table(rows.delays(result, shown), width)
    else:
        yield "This recording is too short to tell."
    yield ""
    if result.events:
        yield from _section("What of the labelled events?")
        yield from table(rows.events(result, shown), width)
        yield ""
    if result.refusals:
        yield from _section("What was refused, and why?")
        for each in result.refusals:
            yield from paragraph(f"{each.what}: {each.why}. Instead: {each.instead}.", width, "- ")
        yield ""
    yield from _section("What do I put into the configuration?")
    if result.best is None:
        yield from paragraph(_nothing(result), width)
    else:
        for note in result.notes:
            yield from paragraph(note, width)
        yield ""
        yield from result.fragment.rstrip().splitlines()


def commented(result: Result) -> str:
    """The fragment as a file: what it replaces and keeps stands above it, as comments."""
    told = [f"# {line}" for note in result.notes for line in paragraph(note, WIDTH)]
    return "\n".join((*told, result.fragment))


def _section(question: str) -> Iterator[str]:
    yield question
    yield "-" * len(question)


def _trust(result: Result, width: int) -> Iterator[str]:
    yield from paragraph(result.trust, width)
    whole = result.whole
    streams = len(result.streams)
    aside = sum(count for _, count in result.set_aside)
    yield from paragraph(
        f"{whole.readings:,} readings of {streams} stream{'s' if streams > 1 else ''} from "
        f"{format_time(whole.first)} to {format_time(whole.last)}, "
        f"{spans.long(whole.running)} of it running; {aside:,} set aside. "
        f"Settings were fitted on the first {spans.long(result.fit.running)} and are proved on the "
        f"last {spans.long(result.proof.running)}.",
        width,
    )
    for number, each in enumerate(result.groupings):
        yield from paragraph(_grouping(each, has_interval(result, number)), width, "- ")
    if any(each.wander.growth is not None and not each.wander.moved for each in result.groupings):
        yield from paragraph(
            "A process wanders where its mean itself moves on and on, so that one part of a "
            "recording does not foretell the next: then means of 200 subgroups vary more, for "
            "their length, than means of 50, by the factor in brackets.",
            width,
        )


def _grouping(found: Grouping, told: bool) -> str:
    if found.wander.moved:
        wander = "a stream moved and stayed away"
    elif found.wander.growth is None:
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


def _about_together(now: Together) -> str:
    said = (
        f"{rows.NOW}: {now.name} ({', '.join(now.detectors)}), by the engine itself. Counted as "
        "the crew hears alerts: what several detectors signal on one side of a stream is one until "
        "it is back to normal; what comes after that rings again. "
    )
    if now.signals:
        said += f"Here {now.observed.alarms:,} came of {now.signals:,} signals"
        said += f"; an alert stood open for {spans.number(100 * now.standing)} % of the time. "
    if now.extrapolated is None:
        return f"{said}No interval by the tails is told: {now.no_interval}."
    return f"{said}One in: the rates of all added up, which is a little too often."


def _clips(shown: Sequence[Setting]) -> bool:
    return any(key == "clip" for each in shown for key, _ in each.constants)


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
        f"{_unfollowed(result)}"
    )


def _unfollowed(result: Result) -> str:
    now = result.together
    if now is None or not now.delays:
        return ""
    said = f" {now.name.capitalize()}: whichever is first"
    if now.unfollowed:
        return f"{said}; {', '.join(now.unfollowed)} not among them, so sooner if anything."
    return f"{said}."


def _nothing(result: Result) -> str:
    if not result.trusted:
        return "Nothing yet: this recording does not say what a setting would do on the line."
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
