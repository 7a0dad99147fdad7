"""Whether subgroup means keep to a centre, or wander, or moved once and stayed away: then no
recording foretells false alarms.

Knows variance ratios and moves of standardised values. Must not know detectors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from monitor.baselining.moving import BRIEF, Means, cut_at, widest
from monitor.methods import shift
from monitor.methods.wander import GROWTH, LONG, SHORT, variance_ratio
from replay.readings import Values
from replay.tuning.grouped import GroupedStream
from replay.tuning.result import Wander

LIMIT = GROWTH
_LENGTHS = (1, 2, 5, 10, 20, SHORT, 100, LONG, 500, 1_000, 2_000)
_FEWEST = 10  # degrees of freedom; fewer say little of a variance


def wander(streams: Sequence[Values]) -> Wander:
    """The verdict on standardised subgroup means, one array a stream."""
    judged = [(m, *variance_ratio(streams, m)) for m in _LENGTHS]
    found = [(m, ratio) for m, ratio, freedom in judged if freedom >= _FEWEST]
    ratios = dict(found)
    growth = ratios[LONG] / ratios[SHORT] if LONG in ratios and ratios[SHORT] > 0 else None
    return Wander(
        tuple(m for m, _ in found),
        tuple(ratio for _, ratio in found),
        growth,
        LIMIT,
        growth is not None and growth > LIMIT,
    )


def kept(streams: Sequence[GroupedStream]) -> tuple[Wander, float]:
    """The verdict on the streams of one way of gathering, labelled causes left out; and how
    neighbours correlate but for what moved."""
    standard = [((each.mean - each.centre) / each.error)[~each.left_out] for each in streams]
    found = wander(standard)
    moves = shift.moves(standard)
    steady = shift.levelled(standard, moves)
    correlation = first_lag(steady)
    if not moves or wander(steady).wanders:
        return found, correlation
    moved = tuple(cut_at(_means(streams[move.number]), move.index) for move in moves)
    return replace(found, wanders=widest(moved) >= BRIEF, moved=moved), correlation


def _means(stream: GroupedStream) -> Means:
    kept = ~stream.left_out
    return stream.readings.stream, stream.last[kept], stream.mean[kept]


def first_lag(streams: Sequence[Values]) -> float:
    """Autocorrelation of neighbouring values, pooled over streams; 0 where they do not vary."""
    products = squares = 0.0
    for values in streams:
        away = values - values.mean() if len(values) else values
        products += float(away[1:] @ away[:-1])
        squares += float(away @ away)
    return products / squares if squares else 0.0
