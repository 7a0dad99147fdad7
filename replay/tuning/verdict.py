"""May the recording be trusted, and what is refused: in sentences.

Knows finished groupings and settings. Must not know how they were judged.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from monitor.baselining import moving
from monitor.baselining.stuck import Stuck
from monitor.configuration import spans
from monitor.methods.cycles import Cycle
from replay.tuning import unsteady
from replay.tuning.intervals import COARSE, CONTRADICTED, NOT_EXPONENTIAL, TOO_FEW
from replay.tuning.result import Grouping, Refusal, Setting
from replay.tuning.running import PROVE
from replay.tuning.tails import FAR

_SHIFT = 0.99 * 8 * 3_600.0
"""A recording of a shift need not begin with its first reading and end with its last."""


@dataclass(frozen=True, slots=True)
class Trust:
    """Whether anything can be recommended, whether only ``with_care``, and that as a sentence."""

    trusted: bool
    with_care: bool
    said: str


def longer(promise: float, running: float) -> str:
    """What to do about a recording of so many ``running`` seconds that is too short; how long one
    must be at least to be asked for an interval of ``promise`` seconds, where it is not."""
    needed = promise / FAR / (1 - PROVE)
    if running >= needed:
        return "record for longer"
    return f"record for longer: about {spans.long(needed)} of recording for {spans.long(promise)}"


def trust(
    groupings: Sequence[Grouping],
    settings: Sequence[Setting],
    running: float,
    mixed: Cycle | None,
    stuck: Sequence[Stuck],
    unit: str,
) -> Trust:
    """What a colleague would say of a recording of so many ``running`` seconds; ``mixed`` are the
    sources that take turns in one stream, ``stuck`` the gauges that stood still."""
    if mixed is not None:
        return Trust(
            False,
            False,
            f"No: {mixed.length} sources that differ take turns in one stream, and a drift of one "
            "of them is caught far later than any drift here, which was put into all of them.",
        )
    if stuck and stuck[0].much:
        said = "No: a gauge stood still, so what it showed is not what the process did."
        return Trust(False, False, said)
    steady = [each for each in groupings if not each.wander.wanders]
    moved = next((each.wander.moved for each in groupings if each.wander.moved), ())
    if not steady and moved:
        where = moving.told(moved, unit)
        said = f"No: the centre moved and stayed away: {where}. One baseline does not fit both."
        return Trust(False, False, said)
    if not steady:
        return Trust(
            False,
            False,
            "No: the process wanders, so what it did here does not say how often it would ring.",
        )
    told = [each for each in settings if each.extrapolated is not None]
    if not told:
        said = "No: it is too short, or too odd, to say how often anything would ring."
        return Trust(False, False, said)
    longest = max(each.supports for each in steady)
    said = f"es, for up to {spans.long(longest)} between false alarms"
    if len(steady) < len(groupings):
        wandering = ", ".join(each.said for each in groupings if each.wander.wanders)
        return Trust(True, True, f"In part: y{said}, but not with {wandering}, where it wanders.")
    if stuck:
        why = "but a gauge stood still for a while."
        return Trust(True, True, f"With care: y{said}, {why}")
    if moved:
        why = f"but for a short part the centre lay elsewhere: {moving.told(moved, unit)}."
        return Trust(True, True, f"With care: y{said}, {why}")
    if any(each.wander.growth is None for each in steady):
        why = "but it is too short to see whether the process wanders."
        return Trust(True, True, f"With care: y{said}, {why}")
    if running < _SHIFT:
        why = "but it is shorter than a shift of 8 h, and has not seen what one brings."
        return Trust(True, True, f"With care: y{said}, {why}")
    return Trust(True, False, f"Y{said}.")


def refusals(
    groupings: Sequence[Grouping],
    settings: Sequence[Setting],
    promise: float,
    running: float,
    left_out: Sequence[str],
    unmatched: Sequence[str],
    mixed: Cycle | None,
    stuck: Sequence[Stuck],
    unit: str,
) -> tuple[Refusal, ...]:
    """Everything that a recording of so many ``running`` seconds does not answer; ``left_out`` are
    settings whose limits could not be worked out, ``unmatched`` configured detectors that cannot be
    judged, ``mixed`` sources that take turns in one stream, ``stuck`` gauges that stood still."""
    refusing = (each.wander.moved for each in groupings if each.wander.wanders)
    moved = next(filter(None, refusing), ())
    return (
        *_of_mixed(mixed),
        *((unsteady.of_stuck(stuck),) if stuck else ()),
        *((unsteady.of_moved(moved, unit),) if moved and not (stuck and stuck[0].much) else ()),
        *_refused(groupings, settings, promise, running, left_out, unmatched),
    )


def _of_mixed(mixed: Cycle | None) -> Iterator[Refusal]:
    if mixed is not None:
        yield Refusal(
            "to recommend any setting",
            f"readings {mixed.length} apart are alike and those between are not "
            f"({mixed.share:.0%} of the variance), as where heads or cavities share a stream",
            "give each a stream of its own: write its key under source.stream, or use a topic for "
            "each",
        )


def _refused(
    groupings: Sequence[Grouping],
    settings: Sequence[Setting],
    promise: float,
    running: float,
    left_out: Sequence[str],
    unmatched: Sequence[str],
) -> Iterator[Refusal]:
    more = longer(max(promise, _least_asked(settings, promise)), running)
    for number, each in enumerate(groupings):
        asked = _least_asked([s for s in settings if s.grouping == number], promise)
        if each.wander.wanders and each.wander.moved:
            continue  # told once for all of them
        if each.wander.wanders:
            yield Refusal(
                f"any interval with {each.said}",
                f"the process wanders: means of 200 subgroups vary {each.wander.growth or 0:.2g} "
                f"times as much, for their length, as means of 50 (limit {each.wander.limit:g})",
                "find what moved the process, and label it with --events if it was a real cause; "
                "or take longer subgroups, or leave such a drift alone with --ignore",
            )
        elif not each.supports:
            yield Refusal(
                f"any interval with {each.said}",
                "labelled causes leave nothing of the last part of the recording",
                "cut them off instead of labelling them, or record again",
            )
        elif asked > each.supports:
            part = "that" if asked <= promise else f"a part of it, one in {spans.long(asked)},"
            yield Refusal(
                f"a promise of {spans.long(promise)} with {each.said}",
                f"{part} is more than 50 times the last part of the recording, which supports "
                f"{spans.long(each.supports)}",
                f"promise less, or {longer(asked, running)}",
            )
    if left_out:
        yield Refusal(
            _named(left_out),
            "one part of the recording holds too few peaks of the statistic to work out a limit",
            f"take smaller subgroups, or {more}",
        )
    for why, instead in (
        (TOO_FEW, more),
        (
            COARSE,
            "judge means of larger subgroups or what adds many points up, as CUSUM and EWMA do, or "
            "take a finer reading from the gauge",
        ),
        (
            CONTRADICTED,
            "look whether its baseline still holds: a stream that stays off it rings on and on",
        ),
    ):
        names = [each.name for each in settings if each.no_interval == why]
        if names:
            yield Refusal(f"an interval for {_named(names)}", why, instead)
    odd = [each for each in settings if each.no_interval == NOT_EXPONENTIAL]
    for clips, instead in (
        (False, "take a detector that clips, such as a CUSUM, or larger subgroups"),
        (True, f"look for what stands out in the report's tail plot, or {more}"),
    ):
        names = [each.name for each in odd if _clips(each) == clips]
        if names:
            yield Refusal(f"an interval for {_named(names)}", NOT_EXPONENTIAL, instead)
    for name in unmatched:
        yield Refusal(
            f"the configured detector {name}",
            "by itself tune judges CUSUM, EWMA and the Shewhart chart of means with its rule "
            "outside",
            "see what all configured detectors ring together, or play the recording",
        )


def _least_asked(settings: Sequence[Setting], promise: float) -> float:
    """The shortest interval that any of the settings is asked for by its part of the promise."""
    return min((each.asked for each in settings), default=promise)


def _clips(setting: Setting) -> bool:
    return any(key == "clip" for key, _ in setting.constants)


def _named(names: Sequence[str]) -> str:
    more = f" and {len(names) - 3} more" if len(names) > 3 else ""
    return "; ".join(names[:3]) + more
