"""What can be wrong with the demo line: each scene as data, with what it puts in and when.

Knows causes, sizes and times. Must not know how a reading is made or sent. All of it is invented.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Kind = Literal["shift", "spread"]


@dataclass(frozen=True, slots=True)
class Cause:
    """One thing that goes wrong, and stays wrong until the scene ends.

    ``onset`` and ``growth`` are seconds of line time: the cause grows evenly from nothing at
    ``onset`` to ``size`` at ``onset`` + ``growth``. ``size`` is in the gauge's unit for a shift
    (its sign is the direction), and the factor on sigma for a spread. ``head`` is None where every
    stream of the characteristic is hit.
    """

    text: str
    characteristic: str
    kind: Kind
    onset: float
    growth: float
    size: float
    head: int | None = None

    @property
    def direction(self) -> Literal["up", "down"]:
        """The side an alert must name; a spread grows up."""
        return "down" if self.kind == "shift" and self.size < 0 else "up"

    def grown(self, seconds: float) -> float:
        """How much of the cause is there, 0 to 1, ``seconds`` into the scene."""
        if seconds < self.onset:
            return 0.0
        return min((seconds - self.onset) / self.growth, 1.0) if self.growth else 1.0

    def average(self, seconds: float) -> float:
        """The mean of ``grown`` from the onset to ``seconds``, which lies after the onset."""
        since = seconds - self.onset
        if since < self.growth:
            return since / (2 * self.growth)
        return 1.0 - self.growth / (2 * since)


@dataclass(frozen=True, slots=True)
class Wander:
    """What autocorrelation looks like: each head's fill wanders as a first-order autoregression.

    ``phi`` is the correlation from one round of five fills to the next, ``sd`` its spread in g.
    """

    phi: float
    sd: float


@dataclass(frozen=True, slots=True)
class Gateway:
    """What stands between the checkweigher and the broker: it repeats, reorders and loses messages.

    ``repeat``, ``delay`` and ``drop`` are chances a message; a delayed message lets 1 to ``behind``
    others pass (more than five overtake it on its own head, which makes it late); ``outages`` are
    (start, seconds) of line time in which nothing gets through.
    """

    repeat: float = 0.0
    delay: float = 0.0
    behind: int = 1
    drop: float = 0.0
    outages: tuple[tuple[float, float], ...] = ()


@dataclass(frozen=True, slots=True)
class Scene:
    """One story: ``seconds`` of line time, and what happens in it."""

    name: str
    title: str
    seconds: float
    causes: tuple[Cause, ...] = ()
    wander: Wander | None = None
    gateway: Gateway = Gateway()


_MINUTE = 60.0
_HALF_HOUR = 30 * _MINUTE
_ONSET = 10 * _MINUTE

SCENES = {
    scene.name: scene
    for scene in (
        Scene("in-control", "nothing is wrong", _HALF_HOUR),
        Scene(
            "head-drift",
            "one head of six drifts",
            _HALF_HOUR,
            causes=(
                Cause(
                    "fill head 4 drifts up", "net-weight", "shift", _ONSET, 5 * _MINUTE, 2.0, head=4
                ),
            ),
        ),
        Scene(
            "all-heads-step",
            "all heads step at once",
            _HALF_HOUR,
            causes=(Cause("all heads step down", "net-weight", "shift", _ONSET, 0.0, -1.5),),
        ),
        Scene(
            "spread-growth",
            "one head fills ever less evenly",
            _HALF_HOUR,
            causes=(
                Cause(
                    "fill head 2 spreads wider",
                    "net-weight",
                    "spread",
                    _ONSET,
                    5 * _MINUTE,
                    2.0,
                    head=2,
                ),
            ),
        ),
        Scene(
            "torque-loosening",
            "the caps come out ever looser",
            _HALF_HOUR,
            causes=(
                Cause("capping torque loosens", "cap-torque", "shift", _ONSET, 5 * _MINUTE, -0.15),
            ),
        ),
        Scene(
            "autocorrelated",
            "nothing is wrong, but each head's fill wanders: textbook limits ring too often",
            _HALF_HOUR,
            wander=Wander(phi=0.8, sd=0.9),
        ),
        Scene(
            "gateway",
            "nothing is wrong, but the gateway repeats, reorders and loses messages",
            _HALF_HOUR,
            gateway=Gateway(
                repeat=0.01,
                delay=0.01,
                behind=12,
                drop=0.005,
                outages=((8 * _MINUTE, 45.0), (20 * _MINUTE, 5.0)),
            ),
        ),
        Scene(
            "demo",
            "one head of six drifts, and the capping torque loosens",
            12 * _MINUTE,
            causes=(
                Cause(
                    "fill head 4 drifts up",
                    "net-weight",
                    "shift",
                    4 * _MINUTE,
                    4 * _MINUTE,
                    2.0,
                    head=4,
                ),
                Cause(
                    "capping torque loosens",
                    "cap-torque",
                    "shift",
                    6 * _MINUTE,
                    3 * _MINUTE,
                    -0.15,
                ),
            ),
            gateway=Gateway(repeat=0.001),
        ),
    )
}
