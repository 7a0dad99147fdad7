"""What alerts on the recording itself take from a verdict that run lengths alone gave.

Knows verdicts and reasons. Must not know how alerts were counted or where a verdict is shown.
"""

from __future__ import annotations

from dataclasses import replace

from monitor.baselining.assess import Assessment
from monitor.baselining.reason import Reason, gravest_first, word
from monitor.configuration import spans
from replay.baseline_rings import Rung


def heard(assessment: Assessment, rung: Rung, rate: float | None) -> Assessment:
    """The same, unless far more rang than is promised: then not trusted, and no more of the promise
    is said to be kept than was. ``rate``: subgroups of all streams in a second, None where unknown.
    """
    delivered = assessment.delivered
    if not rung.too_many or delivered is None:
        return assessment
    found = f"on this recording itself {counted(rung, rate)}"
    if rung.strangers:
        found += f" ({rung.strangers:,} of them at subgroups left out because they lay outside)"
    reason = Reason(
        "provisional",
        "rings",
        found,
        "look at the times listed; where nothing was wrong then, let `driftbell-replay tune` find "
        "detectors that keep the promise on this recording (larger subgroups help; so does "
        "clip: 3 at a CUSUM or EWMA of means, or leaving out detectors of the spread)",
    )
    reasons = gravest_first((reason, *assessment.reasons))
    kept = replace(
        delivered,
        unlucky=min(delivered.unlucky, rung.kept),
        usual=min(delivered.usual, rung.kept),
    )
    return replace(assessment, verdict=word(reasons), reasons=reasons, delivered=kept)


def counted(rung: Rung, rate: float | None) -> str:
    """``the configured detectors ring 36 times in 8 h, where once in 8 h is to be expected:
    cusum-variance 30, shewhart 6``."""
    count = len(rung.rings)
    times = "never" if not count else "once" if count == 1 else f"{count:,} times"
    interval = rung.subgroups / rung.expected
    heard_in, asked = (
        (f"{spans.number(n)} subgroups" if rate is None else spans.long(n / rate))
        for n in (rung.subgroups, interval)
    )
    by = ", ".join(f"{name} {found:,}" for name, found in rung.by_detector.items())
    said = f"the configured detectors ring {times} in {heard_in}"
    return f"{said}, where once in {asked} is to be expected{': ' if by else ''}{by}"
