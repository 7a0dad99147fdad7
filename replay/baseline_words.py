"""A baseline in words and tables, for whoever must decide whether to put it on the line.

Their questions, in this order: May I trust it? What are centre and spread? Do the heads differ? Was
anything odd? What becomes of my promise? What would have rung? Where is it written? What do I do
next?

Knows plain words and how many digits are worth showing. Must not know how a figure was worked out.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator

from monitor import stream_names
from monitor.baselining.delivered import Delivered
from monitor.baselining.estimating import DIFFER
from monitor.baselining.reason import Reason, part
from monitor.configuration import spans
from replay import baseline_tables
from replay.baseline import Estimated
from replay.baseline_verdict import counted

_WIDTH = 88

_VERDICTS = {
    "trust": "Trust it: it may be put on the line.",
    "provisional": "Provisional: it may be used for now, and should be estimated again.",
    "broken": "Provisional: centre and spread may be used for now, but not with these detectors.",
    "refuse": "Refused: no baseline can be taken from this.",
}
"""The verdict, as a sentence."""


def verdict(estimated: Estimated) -> Iterator[str]:
    """May I trust it?"""
    found = estimated.assessment
    reasons = [each for each in found.reasons if each.grade != "note"]
    headline = _headline(estimated)
    if headline is None:
        yield _VERDICTS[found.verdict]
    else:
        broken, why = headline
        reasons.remove(broken)
        yield from textwrap.wrap(
            " ".join((_VERDICTS["broken"], _sentence(why), _sentence(broken.do))),
            _WIDTH,
            break_on_hyphens=False,
        )
    for reason in reasons:
        yield from _point(_sentence(reason.found), _sentence(f"what to do: {reason.do}"))
    if found.verdict == "provisional" and headline is None and found.delivered is not None:
        yield from _point(f"How much the promise shrinks: {_shrinks(estimated, found.delivered)}.")


def _headline(estimated: Estimated) -> tuple[Reason, str] | None:
    """The reason why these detectors do not go with this baseline, and how it is said first."""
    found = estimated.assessment
    if found.delivered is None or not found.delivered.broken:
        return None
    by_kind = {each.kind: each for each in found.reasons}
    if "promise" in by_kind:
        return by_kind["promise"], _often(found.delivered, estimated.rate)
    if "rings" in by_kind:
        return by_kind["rings"], by_kind["rings"].found
    return None


def body(estimated: Estimated) -> Iterator[str]:
    """Everything after the verdict: of what is refused, only what helps to find why."""
    found = estimated.assessment
    sections = [
        baseline_tables.centre(found.estimate, found.baselines, estimated.readings.plan.unit),
        _heads(estimated),
        _odd(estimated),
        _promise(estimated),
        _rung(estimated),
    ]
    for section in [_oddities(estimated)] if found.verdict == "refuse" else sections:
        lines = list(section)
        if lines:
            yield ""
            yield from lines


def next_steps(
    estimated: Estimated, written: str | None, named: str | None, config: str
) -> Iterator[str]:
    """Where is it written, and what do I do next? ``named``: the file as CONFIG would name it."""
    name = estimated.readings.plan.name
    found = estimated.assessment
    if found.verdict == "refuse":
        yield "Nothing is written. Do what stands under the verdict, and estimate again."
    elif written is None:
        yield "Nothing is written: --to FILE.yaml writes the baseline."
    else:
        yield f"Written to {written}. Next, in {config}:"
        yield f"  characteristics: {{{name}: {{baseline: {{file: {named}}}, …}}}}"
        yield f"and let `driftbell check {config}` read it."
        if _headline(estimated) is not None:
            yield "But not yet with these detectors: first do what stands under the verdict."


def note(estimated: Estimated) -> str:
    """One line for the file: the verdict and why."""
    found = estimated.assessment
    word = {"trust": "Trusted.", "provisional": "Provisional."}[found.verdict]
    why = [_sentence(r.found) for r in found.reasons if r.grade == "provisional"]
    if found.delivered is not None and not found.delivered.broken:
        why.append(f"How much the promise shrinks: {_shrinks(estimated, found.delivered)}.")
    return " ".join([word, *why])


def _often(found: Delivered, rate: float | None) -> str:
    if rate is None:
        often, asked = (f"{spans.number(n)} subgroups" for n in (found.rings, found.subgroups))
    else:
        often, asked = (spans.long(n / rate) for n in (found.rings, found.subgroups))
    return (
        f"with the configured detectors it may ring as often as once in {often} with nothing "
        f"wrong, instead of once in {asked}"
    )


def _shrinks(estimated: Estimated, found: Delivered) -> str:
    if _rang_more(estimated, found):
        return f"what rang on this recording leaves {share(found.unlucky)} of it"
    if found.unlucky >= 0.995:
        return "not at all, as far as this recording shows"
    return (
        "one time out of ten, a baseline estimated as this one was keeps less than "
        f"{share(found.unlucky)} of the promised interval between false alarms"
    )


def _rang_more(estimated: Estimated, found: Delivered) -> bool:
    """Whether it is what rang on the recording that keeps so little of the promise."""
    rung = estimated.rung
    return rung is not None and rung.too_many and rung.kept <= found.unlucky


def share(left: float) -> str:
    """A part of a whole, after "less than" or "keeps"."""
    return "0.1 %" if left < 0.001 else part(left)


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:] + "."


def _point(*sentences: str) -> Iterator[str]:
    for index, sentence in enumerate(sentences):
        yield from textwrap.wrap(
            sentence,
            _WIDTH,
            initial_indent="  - " if index == 0 else "    ",
            subsequent_indent="    ",
            break_on_hyphens=False,
        )


def _heads(estimated: Estimated) -> Iterator[str]:
    estimate = estimated.assessment.estimate
    if len(estimate.each) < 2:
        return
    yield "Do the streams differ?"
    heads = estimate.heads
    if heads is not None:
        yield from _point(
            f"Means: F {heads.ratio:.3g} with {heads.above:.0f} and {heads.below:.0f} degrees of "
            f"freedom, p {_chance(heads.p)}; {heads.share:.1%} of the variance of subgroup means "
            "lies between streams.",
            f"(F: how much more streams' means vary than chance alone makes them, 1 being no more; "
            f"p: how often chance alone makes them differ so much. Below {DIFFER:g} they count as "
            "different.)",
        )
    yield from _point(
        f"Spreads: the largest sigma is {estimate.spread_ratio**0.5:.3g} times the least."
    )
    answer = "a baseline for each stream" if estimate.differ else "one baseline for all"
    yield from _point(f"So there is {answer}.")


def _chance(p: float) -> str:
    return f"{p:.2g}" if p >= 1e-4 else "below 0.0001"


def _odd(estimated: Estimated) -> Iterator[str]:
    yield "Was anything odd?"
    quiet = True
    for reason in estimated.assessment.reasons:
        if reason.grade == "note" and not reason.kind.startswith("streams-"):
            quiet = False
            yield from _point(_sentence(reason.found), _sentence(f"what to do: {reason.do}"))
    for line in _oddities(estimated):
        quiet = False
        yield line
    if quiet:
        yield from _point("Nothing was found.")


def _oddities(estimated: Estimated) -> Iterator[str]:
    """What was left out, lies outside or was not used."""
    found = estimated.assessment
    sigma = min(each.values.sigma for each in found.estimate.each)
    if estimated.in_spans:
        yield from _point(f"Left out for their time, as asked: {estimated.in_spans:,} subgroups.")
    if estimated.left_outside:
        yield from _point(
            f"Left out because they lay outside, as asked: "
            f"{estimated.left_outside_subgroups:,} subgroups:"
        )
        yield from baseline_tables.strangers(estimated.left_outside, sigma)
    if found.outside.points:
        yield "  Outside, and part of the estimate:"
        yield from baseline_tables.strangers(found.outside.points, sigma)
    aside = estimated.readings.set_aside
    if aside:
        by_size = sorted(aside.items(), key=lambda item: (-item[1], item[0]))
        counts = ", ".join(f"{reason} {count:,}" for reason, count in by_size)
        yield from _point(f"Set aside, not used: {counts}.")
    if found.skipped:
        names = ", ".join(stream_names.name(s) for s in found.skipped[: baseline_tables.SHOWN])
        yield from _point(
            f"Streams with fewer than two subgroups, which have no baseline: {names}."
        )


def _promise(estimated: Estimated) -> Iterator[str]:
    found, rate = estimated.assessment.delivered, estimated.rate
    yield "What becomes of the promise?"
    if found is None:
        yield from _point("Nothing can be said: no detector's run length can be worked out.")
        return
    once = f"{spans.number(found.subgroups)} subgroups"
    if rate:
        once += f", {spans.long(found.subgroups / rate)} at this recording's pace"
    yield from _point(
        f"With nothing wrong and an exact baseline, all detectors together ring once in {once}.",
        _of_estimates(estimated, found),
    )
    for left, why in (
        (
            found.of_estimation,
            "The size of the recording alone leaves, one time out of ten, less than",
        ),
        (found.of_following, "That means follow each other leaves"),
        (found.of_skewness, "That means are skewed leaves"),
    ):
        if left < 0.9:
            yield from _point(f"{why} {part(left)} of it.")
    if found.left_out:
        yield from _point(f"Not counted, as too long to work out: {', '.join(found.left_out)}.")


def _rung(estimated: Estimated) -> Iterator[str]:
    rung = estimated.rung
    if rung is None:
        return
    yield "What would have rung on this recording?"
    note = (
        "Counted as the crew hears alerts: one that comes back is heard twice. What was left out "
        "for its time is not played. Centre and spread come from these same readings, so few "
        "alerts prove nothing."
    )
    said = counted(rung, estimated.rate)
    if rung.strangers:
        said += f"; {rung.strangers:,} at subgroups left out because they lay outside"
    yield from _point(_sentence(said), note)
    if rung.rings:
        yield from baseline_tables.rings(rung.rings)


def _of_estimates(estimated: Estimated, found: Delivered) -> str:
    if _rang_more(estimated, found):
        return f"What rang on this recording itself leaves {share(found.unlucky)} of that."
    if found.unlucky >= 0.995:
        return "A baseline estimated as this one was keeps all of that, nine times out of ten."
    return (
        f"A baseline estimated as this one was keeps {share(found.usual)} of that as often as not, "
        f"and less than {share(found.unlucky)} one time out of ten: so far off the truth may "
        "centre and spread be that a recording as long as this one gives."
    )
