"""Whether subgroup means keep to a centre, or wander: then no recording foretells false alarms.

Knows block means of standardised values. Must not know detectors.
"""

from __future__ import annotations

from collections.abc import Sequence

from replay.readings import Values
from replay.tuning.result import Wander

SHORT, LONG = 50, 200
LIMIT = 1.5
_LENGTHS = (1, 2, 5, 10, 20, SHORT, 100, LONG, 500, 1_000, 2_000)
_FEWEST = 10  # degrees of freedom; fewer say little of a variance


def variance_ratio(streams: Sequence[Values], length: int) -> float | None:
    """m·var(means of m)/var for m = ``length``, pooled over streams about each one's own mean.

    A. W. Lo & A. C. MacKinlay 1988, Review of Financial Studies 1, use it for another end. None
    where there are fewer than ten degrees of freedom.
    """
    squares = freedom = single = count = 0.0
    for values in streams:
        whole = len(values) // length
        single += float(((values - values.mean()) ** 2).sum()) if len(values) else 0.0
        count += max(len(values) - 1, 0)
        if whole < 2:
            continue
        means = values[: whole * length].reshape(whole, length).mean(axis=1)
        squares += float(((means - means.mean()) ** 2).sum())
        freedom += whole - 1
    if freedom < _FEWEST or not single:
        return None
    return length * (squares / freedom) / (single / count)


def wander(streams: Sequence[Values]) -> Wander:
    """The verdict on standardised subgroup means, one array a stream."""
    found = [(m, ratio) for m in _LENGTHS if (ratio := variance_ratio(streams, m)) is not None]
    ratios = dict(found)
    growth = ratios[LONG] / ratios[SHORT] if LONG in ratios and ratios[SHORT] > 0 else None
    return Wander(
        tuple(m for m, _ in found),
        tuple(ratio for _, ratio in found),
        growth,
        LIMIT,
        growth is not None and growth > LIMIT,
    )


def first_lag(streams: Sequence[Values]) -> float:
    """Autocorrelation of neighbouring values, pooled over streams; 0 where they do not vary."""
    products = squares = 0.0
    for values in streams:
        away = values - values.mean() if len(values) else values
        products += float(away[1:] @ away[:-1])
        squares += float(away @ away)
    return products / squares if squares else 0.0
