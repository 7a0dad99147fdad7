"""Constants once worked out stay, while what is asked stays."""

from __future__ import annotations

from dataclasses import replace

from plans import characteristic

from monitor.pinning import pinned
from monitor.plan import CharacteristicPlan, CusumPlan, DetectorPlan, Intent, Judgement, Plan

ASKED = Intent("cusum", "individual", 10_000.0, 1, catch=1.5)


def plan(h: float, intent: Intent | None = ASKED, revision: str = "r") -> Plan:
    """One characteristic with one detector."""
    made = characteristic(CusumPlan("individual", 0.5, h))
    return Plan((with_detector(made, h, intent, revision),))


def with_detector(
    made: CharacteristicPlan, h: float, intent: Intent | None, revision: str
) -> CharacteristicPlan:
    assert made.judgement is not None
    scheme = CusumPlan("individual", 0.5, h)
    detector = DetectorPlan("cusum", "cusum", scheme, revision, intent)
    judgement = Judgement(made.judgement.baseline, (detector,))
    stream = (("head", "1"),)
    return replace(made, judgement=judgement, by_stream={stream: judgement})


def decision_intervals(found: Plan) -> set[float]:
    (each,) = found.characteristics
    assert each.judgement is not None
    schemes = [j.detectors[0].scheme for j in (each.judgement, *each.by_stream.values())]
    return {scheme.h for scheme in schemes if isinstance(scheme, CusumPlan)}


def test_the_same_asked_keeps_its_constants() -> None:
    assert decision_intervals(pinned(plan(8.001), plan(8.0))) == {8.0}


def test_something_else_asked_gets_new_ones() -> None:
    before = plan(8.0)
    assert decision_intervals(pinned(plan(8.1, replace(ASKED, interval=2e4)), before)) == {8.1}
    assert decision_intervals(pinned(plan(8.1, revision="other"), before)) == {8.1}


def test_what_is_written_down_is_never_replaced() -> None:
    assert decision_intervals(pinned(plan(5.0, None), plan(8.0))) == {5.0}
    assert decision_intervals(pinned(plan(5.0, None), plan(8.0, None))) == {5.0}


def test_another_characteristic_is_left_alone() -> None:
    before = Plan((replace(plan(8.0).characteristics[0], name="torque"),))
    assert pinned(plan(8.1), before) == plan(8.1)
