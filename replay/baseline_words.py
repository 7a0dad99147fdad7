"""A baseline in words and tables, for whoever must decide whether to put it on the line.

Their questions, in this order: May I trust it? What are centre and spread? Do the heads differ? Was
anything odd? What becomes of my promise? Where is it written? What do I do next?

Knows plain words and how many digits are worth showing. Must not know how a figure was worked out.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator

from monitor import stream_names
from monitor.baselining.delivered import Delivered
from monitor.baselining.reason import part
from monitor.configuration import spans
from replay import baseline_tables
from replay.baseline import Estimated

_WIDTH = 88

_VERDICTS = {
    "trust": "Trust it: it may be put on the line.",
    "provisional": "Provisional: it may be used for now, and should be estimated again.",
    "refuse": "Refused: no baseline can be taken from this.",
}
"""The verdict, as a sentence."""


def verdict(estimated: Estimated) -> Iterator[str]:
    """May I trust it?"""
    found = estimated.assessment
    yield _VERDICTS[found.verdict]
    for reason in found.reasons:
        if reason.grade != "note":
            yield from _point(_sentence(reason.found), _sentence(f"what to do: {reason.do}"))
    if found.verdict == "provisional" and found.delivered is not None:
        yield from _point(f"How much the promise shrinks: {_shrinks(found.delivered)}.")


def body(estimated: Estimated, rate: float | None) -> Iterator[str]:
    """Everything after the verdict; ``rate``: subgroups a second of all streams, None unknown."""
    found = estimated.assessment
    for section in (
        baseline_tables.centre(found.estimate, found.baselines, estimated.readings.plan.unit),
        _heads(estimated),
        _odd(estimated),
        _promise(estimated, rate),
    ):
        lines = list(section)
        if lines:
            yield ""
            yield from lines


def next_steps(
    estimated: Estimated, written: str | None, named: str | None, config: str
) -> Iterator[str]:
    """Where is it written, and what do I do next? ``named``: the file as CONFIG would name it."""
    name = estimated.readings.plan.name
    if estimated.assessment.verdict == "refuse":
        yield "Nothing is written. Do what stands under the verdict, and estimate again."
    elif written is None:
        yield "Nothing is written: --to FILE.yaml writes the baseline."
    else:
        yield f"Written to {written}. Next, in {config}:"
        yield f"  characteristics: {{{name}: {{baseline: {{file: {named}}}, …}}}}"
        yield f"and let `driftbell check {config}` read it."


def note(estimated: Estimated) -> str:
    """One line for the file: the verdict and why."""
    found = estimated.assessment
    word = {"trust": "Trusted.", "provisional": "Provisional."}[found.verdict]
    why = [_sentence(r.found) for r in found.reasons if r.grade == "provisional"]
    if found.delivered is not None:
        why.append(f"How much the promise shrinks: {_shrinks(found.delivered)}.")
    return " ".join([word, *why])


def _shrinks(found: Delivered) -> str:
    if found.unlucky >= 0.995:
        return "not at all, as far as this recording shows"
    return (
        "one time out of ten, a baseline estimated as this one was keeps less than "
        f"{share(found.unlucky)} of the promised interval between false alarms"
    )


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
            "lies between streams."
        )
    yield from _point(
        f"Spreads: the largest sigma is {estimate.spread_ratio**0.5:.3g} times the least."
    )
    answer = "a baseline for each stream" if estimate.differ else "one baseline for all"
    yield from _point(f"So there is {answer}.")


def _chance(p: float) -> str:
    return f"{p:.2g}" if p >= 1e-4 else "below 0.0001"


def _odd(estimated: Estimated) -> Iterator[str]:
    found = estimated.assessment
    notes = [r for r in found.reasons if r.grade == "note" and not r.kind.startswith("streams-")]
    sigma = min(each.values.sigma for each in found.estimate.each)
    yield "Was anything odd?"
    quiet = True
    for reason in notes:
        quiet = False
        yield from _point(_sentence(reason.found), _sentence(f"what to do: {reason.do}"))
    if estimated.in_spans:
        quiet = False
        yield from _point(f"Left out for their time, as asked: {estimated.in_spans:,} subgroups.")
    if estimated.left_outside:
        quiet = False
        yield from _point(
            f"Left out because they lay outside, as asked: "
            f"{estimated.left_outside_subgroups:,} subgroups:"
        )
        yield from baseline_tables.strangers(estimated.left_outside, sigma)
    if found.outside.points:
        quiet = False
        yield "  Outside, and part of the estimate:"
        yield from baseline_tables.strangers(found.outside.points, sigma)
    aside = estimated.readings.set_aside
    if aside:
        quiet = False
        by_size = sorted(aside.items(), key=lambda item: (-item[1], item[0]))
        counts = ", ".join(f"{reason} {count:,}" for reason, count in by_size)
        yield from _point(f"Set aside, not used: {counts}.")
    if found.skipped:
        quiet = False
        names = ", ".join(stream_names.name(s) for s in found.skipped[: baseline_tables.SHOWN])
        yield from _point(
            f"Streams with fewer than two subgroups, which have no baseline: {names}."
        )
    if quiet:
        yield from _point("Nothing was found.")


def _promise(estimated: Estimated, rate: float | None) -> Iterator[str]:
    found = estimated.assessment.delivered
    yield "What becomes of the promise?"
    if found is None:
        yield from _point("Nothing can be said: no detector's run length can be worked out.")
        return
    once = f"{spans.number(found.subgroups)} subgroups"
    if rate:
        once += f", {spans.long(found.subgroups / rate)} at this recording's pace"
    yield from _point(
        f"With nothing wrong and an exact baseline, all detectors together ring once in {once}.",
        _of_estimates(found),
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


def _of_estimates(found: Delivered) -> str:
    if found.unlucky >= 0.995:
        return "A baseline estimated as this one was keeps all of that, nine times out of ten."
    return (
        f"A baseline estimated as this one was keeps {share(found.usual)} of that as often as not, "
        f"and less than {share(found.unlucky)} one time out of ten."
    )
