"""The first screen: the answer in a paragraph, and where to read on.

Knows what a reader in a hurry needs. Must not know the sections' contents.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.configuration import spans
from replay.tuning.report import chosen, markup, words
from replay.tuning.report.markup import Html, Text
from replay.tuning.result import Result, Setting, Shown

CAUTION = (
    "This report advises people. It is not a safety function, nothing may rely on it to stop a "
    "machine, and it does not replace the checks that the law asks for. Its figures hold for the "
    "process as it ran in this recording; after a change of product, gauge or machine, record and "
    "tune again."
)


def render(result: Result, questions: Sequence[tuple[str, str]]) -> str:
    """Heading, verdict, answer, key figures, caution, and the questions as links."""
    links = "".join(f'<li><a href="#{name}">{question}</a></li>' for name, question in questions)
    best = chosen.best(result)
    title = result.title or result.characteristic
    span = f"{words.moment(result.whole.first)} to {words.moment(result.whole.last)} UTC"
    return (
        f"<header><h1>{markup.inline(title)}: which setting?</h1>"
        f'<p class="small">{markup.inline(result.characteristic)}, recorded {span}</p>'
        f"{_verdict(result)}"
        f"{markup.paragraph(_answer(result, best), 'answer')}"
        f"{markup.facts(_key(result, best), 'key')}"
        f"{markup.paragraph(CAUTION, 'caution')}"
        f'<nav aria-label="Questions"><ol>{links}</ol></nav></header>'
    )


def _verdict(result: Result) -> str:
    """Whether the recording may be trusted, with a sign and a word besides the colour."""
    if not result.trusted:
        word, kind = "✗ May not be trusted", "verdict no"
    elif result.with_care:
        word, kind = "! With care", "verdict care"
    else:
        word, kind = "✓ May be trusted", "verdict"
    return f'<p class="{kind}"><strong>{word}</strong>{markup.inline(result.trust)}</p>'


def _answer(result: Result, best: Setting | None) -> Text:
    asked = spans.long(result.promise)
    tried = words.plural(len(result.settings), "setting")
    if best is None:
        told = f"Of {tried}, none can be recommended for one false alarm in {asked}."
        if result.refusals:
            told += f" Refused: {words.refusal(result.refusals[0])}"
        return told + _today(result)
    name = f"<strong>{markup.inline(best.name)}</strong>"
    told = f" ({words.detector(best)}, {words.constants(best)})."
    told += f" With nothing wrong it rings once in {_delivered(best)}; "
    told += f"asked was {_asked(best, result)}."
    delay = chosen.first_step(best, result)
    if delay is not None and delay.late_readings.value is not None:
        told += f" It catches {words.drift(delay, result)} within "
        told += f"{spans.number(delay.late_readings.value)} pieces of the stream"
        if delay.late_seconds.value is not None:
            told += f" ({spans.long(delay.late_seconds.value)})"
        told += " nine times in ten"
        if delay.median_readings.value is not None:
            told += f", half the time within {spans.number(delay.median_readings.value)}"
        told += "."
    spread = chosen.best_spread(result)
    if spread is not None:
        told += f" For the spread, {spread.name} goes beside it."
    if result.breaking:
        staying = " and ".join(result.breaking)
        stay, ring = ("stays", "rings") if len(result.breaking) == 1 else ("stay", "ring")
        told += (
            f" Caution: {staying} {stay} as configured and {ring} more often than asked, so that "
            "all of them together break the promise: see what to put in your configuration."
        )
    return Html(
        f"Of {tried}, take {name}{markup.inline(told + _fragment(result) + _today(result))}"
    )


def _fragment(result: Result) -> str:
    """What all that is to be put in does together, in a sentence."""
    whole = result.proposed
    if whole is None:
        return ""
    seen = whole.observed
    return (
        " All of the fragment together would have rung "
        f"{words.plural(seen.alarms, 'time')} in the {spans.long(seen.seconds)} that prove it; "
        f"asked was one in {spans.long(whole.asked)}."
    )


def _asked(best: Setting, result: Result) -> str:
    whole = spans.long(result.promise)
    if best.asked == result.promise:
        return whole
    return f"{spans.long(best.asked)}, its part of one in {whole} for all detectors"


def _today(result: Result) -> str:
    """What runs now, in a sentence: the reader decides whether to change it."""
    now = result.together
    if now is None:
        return ""
    if now.observed.interval is None and now.extrapolated is None:
        return ""
    if now.extrapolated is not None:
        often = _delivered(now)
    else:
        often = words.joined(words.counted(now.observed))
    told = f" What runs now, all of it together, rings once in {often}"
    delay = chosen.first_step(now, result)
    if delay is not None and delay.late_readings.value is not None:
        told += (
            f", and catches that step within {spans.number(delay.late_readings.value)} pieces "
            "nine times in ten"
        )
    return f"{told}."


def _delivered(best: Shown) -> str:
    if best.extrapolated is None:
        return words.joined(words.counted(best.observed))
    if best.extrapolated.interval.high is None:
        return f"at least {spans.long(best.extrapolated.interval.low)}"
    about = spans.long(best.extrapolated.seconds)
    return f"about {about}, somewhere from {words.time_range(best.extrapolated.interval)}"


def _key(result: Result, best: Setting | None) -> list[tuple[str, Text]]:
    note = "between false alarms"
    if best is not None and best.asked != result.promise:
        note += " of all detectors"
    pairs = [_tile("Asked", spans.long(result.promise), note)]
    if best is None:
        supports = max((grouping.supports for grouping in result.groupings), default=0.0)
        if result.trusted and supports:
            note = "the longest interval it supports"
            pairs.append(_tile("This recording", spans.long(supports), note))
        return pairs
    # As the crew would hear it: all that is to be put in, where it is known.
    shown: Shown = result.proposed or best
    whole = "" if result.proposed is None else "of all of the fragment "
    pairs.append(
        _tile(
            "Counted",
            words.plural(shown.observed.alarms, "false alarm"),
            f"{whole}in {spans.long(shown.observed.seconds)} of the last part",
        )
    )
    if shown.extrapolated is not None:
        interval = shown.extrapolated.interval
        if interval.high is None:
            told = f"at least {spans.long(interval.low)}"
            note = f"between false alarms {whole}".rstrip() + "; more than this recording can tell"
        else:
            told = spans.long(shown.extrapolated.seconds)
            note = (
                f"between false alarms {whole}".rstrip()
                + f"; {words.time_range(interval)} with 90 %"
            )
        pairs.append(_tile("Delivered", told, note))
    delay = chosen.first_step(best, result)
    if delay is not None and delay.late_readings.value is not None:
        pairs.append(
            _tile(
                "Caught",
                f"{spans.number(delay.late_readings.value)} pieces",
                f"nine in ten, {words.drift(delay, result)}",
            )
        )
    return pairs


def _tile(name: str, told: str, note: str) -> tuple[str, Text]:
    return name, markup.with_note(told, note)
