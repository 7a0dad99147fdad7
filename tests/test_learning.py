"""A stream learns its baseline on the line: when it is proposed, and when it is judged by."""

from __future__ import annotations

import random
from dataclasses import replace
from typing import Any

import numpy as np
import orjson
import pytest
from plans import GAUGE, START, characteristic, fold, reading

from monitor import judging
from monitor.engine import Engine
from monitor.entries import Configured, Entry
from monitor.learning import Learner
from monitor.messages import AlertEvent, BaselineMessage
from monitor.outputs import Alert, Output
from monitor.plan import (
    CharacteristicPlan,
    CusumPlan,
    DeclaredDetector,
    Intent,
    LearnPlan,
    Plan,
    ShewhartPlan,
)
from monitor.stream import StreamState
from monitor.subgroups import Subgroup
from monitor.times import SECOND

DECLARED = (
    DeclaredDetector("cusum", "cusum", CusumPlan("individual", 0.5, 12.0), '{"detector":1}'),
)


def learning(
    subgroups: int = 1_000,
    hours: float = 8.0,
    *,
    adopt: bool = True,
    detectors: tuple[DeclaredDetector, ...] = DECLARED,
) -> CharacteristicPlan:
    """A gauge without a baseline, that learns one."""
    learn = LearnPlan(subgroups, round(hours * 3_600) * SECOND, adopt, detectors)
    made = characteristic(CusumPlan("individual", 0.5, 12.0), source=GAUGE)
    return replace(made, judgement=None, learn=learn)


def weights(count: int, seed: int = 7, mean: float = 341.2, sigma: float = 1.9) -> list[float]:
    chance = random.Random(seed)
    return [chance.gauss(mean, sigma) for _ in range(count)]


def spaced(values: list[float], first: int = 0) -> list[Entry]:
    """One reading in thirty seconds: 1,000 in a little over eight hours."""
    return [reading(value, 30.0 * at, at) for at, value in enumerate(values, first)]


class Line:
    """An engine with one stream."""

    def __init__(self, plan: CharacteristicPlan) -> None:
        self.engine = Engine(Plan((plan,)), points=False)
        self.outputs: list[Output] = []

    def weigh(self, values: list[float], first: int = 0) -> None:
        self.outputs += fold(self.engine, spaced(values, first))

    @property
    def stream(self) -> StreamState:
        (state,) = self.engine.streams()
        return state

    @property
    def proposal(self) -> BaselineMessage:
        assert self.stream.learning.proposal is not None
        return self.stream.learning.proposal

    @property
    def judging(self) -> tuple[bool, str | None]:
        said = self.engine.standing(self.stream)["judging"]
        return said["judging"], said["why"]

    @property
    def alerts(self) -> list[AlertEvent]:
        return [each.event for each in self.outputs if isinstance(each, Alert)]


def test_it_is_not_judged_until_it_has_learned() -> None:
    line = Line(learning())
    line.weigh([*weights(500), *[400.0] * 5, *weights(200, 2)])
    assert line.judging == (False, "learning a baseline: 705 of 1000 subgroups")
    assert line.stream.learning.proposal is None
    assert line.alerts == []


def test_a_trusted_baseline_is_adopted_and_rings() -> None:
    line = Line(learning())
    line.weigh(weights(1_000))
    proposal = line.proposal
    assert (proposal["verdict"], proposal["adopted"]) == ("trust", True)
    assert proposal["mean"] == pytest.approx(341.2, abs=4 * 1.9 / 1_000**0.5)
    assert proposal["sigma"] == pytest.approx(1.9, rel=0.1)
    assert proposal["subgroups"] == 1_000
    assert line.judging == (True, None)
    line.weigh(weights(200, 3), first=1_000)
    assert line.alerts == []
    line.weigh(weights(20, 4, mean=345.0), first=1_200)
    (raised,) = [event for event in line.alerts if event["event"] == "raised"]
    assert raised["direction"] == "up"
    assert raised["baseline"] is not None
    assert raised["baseline"]["mean"] == proposal["mean"]


def test_what_is_written_down_is_judged_by_under_the_same_revision() -> None:
    """Whoever copies a proposal into the configuration changes no alert id."""
    line = Line(learning())
    line.weigh(weights(1_000))
    said = line.proposal
    written = judging.judgement(said["mean"], said["sigma"], said["sigma_between"], DECLARED)
    assert line.stream.judgement == written


def test_not_asked_to_adopt_it_only_proposes() -> None:
    line = Line(learning(adopt=False))
    line.weigh(weights(1_100))
    assert (line.proposal["verdict"], line.proposal["adopted"]) == ("trust", False)
    waits = "a baseline was proposed and waits to be written down, or for adopt: true"
    assert line.judging == (False, waits)


def test_too_few_are_provisional_and_never_adopted() -> None:
    """Methods: 1,000 independent subgroups over a shift; 300 shrink the promise too much."""
    line = Line(learning(300, 1.0))
    line.weigh(weights(300))
    assert (line.proposal["verdict"], line.proposal["adopted"]) == ("provisional", False)
    assert {each["kind"] for each in line.proposal["reasons"]} >= {"few", "short"}
    assert line.proposal["promise_kept"] is not None
    assert 0 < line.proposal["promise_kept"] < 1
    assert not line.judging[0]
    line.weigh(weights(900, 2), first=300)
    assert line.proposal["subgroups"] == 1_200
    assert line.proposal["adopted"]


def test_a_wandering_process_is_refused_and_begins_anew() -> None:
    chance, level, values = random.Random(5), 341.0, []
    for _ in range(1_000):
        level += chance.gauss(0, 0.5)
        values.append(level + chance.gauss(0, 1))
    line = Line(learning())
    line.weigh(values)
    assert line.proposal["verdict"] == "refuse"
    assert line.proposal["reasons"][0]["kind"] == "wander"
    assert line.judging == (False, "learning a baseline: 0 of 1000 subgroups")


def test_not_before_its_time() -> None:
    line = Line(learning(1_000, 12.0))
    line.weigh(weights(1_200))
    assert line.judging == (False, "learning a baseline: 10.0 of 12 h")
    line.weigh(weights(300, 2), first=1_200)
    assert line.proposal["adopted"]


def test_detectors_that_cannot_be_worked_out_are_a_reason_to_refuse() -> None:
    asked = Intent("cusum", "individual", 1e6, 1, catch=0.001)
    line = Line(learning(detectors=(DeclaredDetector("cusum", "cusum", asked, "{}"),)))
    line.weigh(weights(1_000))
    assert line.proposal["verdict"] == "refuse"
    assert line.proposal["reasons"][0]["kind"] == "unsolvable"
    assert "catch" in line.proposal["reasons"][0]["found"]


def test_an_intent_is_worked_out_from_what_was_learned() -> None:
    asked = Intent("cusum", "individual", 1e6, 1, catch=3.8)
    line = Line(learning(detectors=(DeclaredDetector("cusum", "cusum", asked, '{"x":1}'),)))
    line.weigh(weights(1_000))
    assert line.stream.judgement is not None
    (detector,) = line.stream.judgement.detectors
    assert isinstance(detector.scheme, CusumPlan)
    assert detector.scheme.k == pytest.approx(1.9 / line.proposal["sigma"], rel=1e-5)
    assert detector.intent == asked


@pytest.mark.parametrize("cut", [1, 400, 999, 1_000, 1_010, 1_030])
def test_a_restart_forgets_nothing(cut: int) -> None:
    """fold(snapshot, tail) = fold(all), while learning, at adoption and after."""
    entries = spaced([*weights(1_000), *weights(40, 2, mean=346.0)])
    whole = Line(learning())
    whole.outputs += fold(whole.engine, entries)
    halves = Line(learning())
    halves.outputs += fold(halves.engine, entries[:cut])
    state, streams = halves.engine.state(), [s.state() for s in halves.engine.streams()]
    again = Line(learning())
    again.engine.restore(*orjson.loads(orjson.dumps([state, streams])))
    again.outputs += fold(again.engine, entries[cut:])
    assert halves.alerts + again.alerts == whole.alerts
    assert again.stream.state() == whole.stream.state()
    assert whole.alerts


def reconfigured(line: Line, plan: CharacteristicPlan) -> None:
    time = START + 10**6 * SECOND
    line.outputs += line.engine.fold(Configured(time, Plan((plan,))))


def test_another_title_goes_on_learning_and_judging() -> None:
    line = Line(learning())
    line.weigh(weights(500))
    reconfigured(line, replace(learning(), title="Weight"))
    assert line.judging[1] == "learning a baseline: 500 of 1000 subgroups"
    line.weigh(weights(500, 2), first=500)
    adopted = line.stream.judgement
    reconfigured(line, replace(learning(), title="Net weight"))
    assert line.stream.judgement == adopted
    assert line.judging == (True, None)


def test_another_detector_judges_by_what_was_learned() -> None:
    line = Line(learning())
    line.weigh(weights(1_000))
    mean = line.proposal["mean"]
    shewhart = ShewhartPlan("individual", 5.0, (), "both")
    reconfigured(line, learning(detectors=(DeclaredDetector("s", "shewhart", shewhart, "{}"),)))
    assert line.stream.judgement is not None
    assert [each.name for each in line.stream.judgement.detectors] == ["s"]
    assert line.stream.judgement.baseline.mean == mean


CATCHING = DeclaredDetector(
    "cusum", "cusum", Intent("cusum", "individual", 1e5, 1, catch=2.0), '{"detector":2}'
)
HOPELESS = DeclaredDetector(
    "cusum", "cusum", Intent("cusum", "individual", 1e5, 1, catch=0.001), '{"detector":3}'
)


def reload(line: Line, plan: CharacteristicPlan) -> None:
    line.outputs += line.engine.fold(Configured(START + 100_000 * SECOND, Plan((plan,))))


def test_detectors_that_it_cannot_give_wait_for_others() -> None:
    """What was learned is kept: only the detectors of the new configuration ask too much of it."""
    line = Line(learning(detectors=(CATCHING,)))
    line.weigh(weights(1_000))
    learned = line.stream.judgement
    reload(line, learning(detectors=(HOPELESS,)))
    why = "the detectors cannot be worked out from the baseline it learned"
    assert line.judging == (False, why)
    assert not line.proposal["adopted"]
    line.weigh(weights(10, 3), first=5_000)
    reload(line, learning(detectors=(CATCHING,)))
    assert line.judging == (True, None)
    assert line.proposal["adopted"]
    assert line.stream.judgement == learned


def test_a_trusted_proposal_is_adopted_once_that_is_asked_for() -> None:
    line = Line(learning(adopt=False))
    line.weigh(weights(1_000))
    reload(line, learning(adopt=True))
    assert line.judging == (True, None)
    assert line.proposal["adopted"]
    judged = line.stream.judgement
    assert judged is not None
    assert judged.baseline.mean == line.proposal["mean"]
    reload(line, learning(adopt=False))
    assert (line.judging[0], line.proposal["adopted"]) == (False, False)


def test_a_spread_too_small_to_reckon_with_is_refused() -> None:
    """Of noise of a gauge whose readings are 1e-200: squares of that are nothing."""
    line = Line(learning(detectors=(CATCHING,)))
    with np.errstate(divide="ignore", invalid="ignore"):
        line.weigh(weights(1_000, mean=0.0, sigma=1e-200))
    assert (line.proposal["verdict"], line.judging[0]) == ("refuse", False)


def test_other_readings_are_learned_anew() -> None:
    line = Line(learning())
    line.weigh(weights(1_000))
    other = learning()
    reconfigured(line, replace(other, source=replace(other.source, plausible_upper=500.0)))
    assert line.judging == (False, "learning a baseline: 0 of 1000 subgroups")
    assert line.stream.learning.proposal is None


def test_the_next_baseline_is_learned_beside_the_one_in_force() -> None:
    """The loop goes on: watched by the old one while the tighter one is proposed."""
    given = characteristic(CusumPlan("individual", 0.5, 12.0), mean=341.2, sigma=4.0)
    line = Line(replace(given, learn=learning(adopt=True).learn))
    line.weigh(weights(999))
    assert line.judging == (True, None)
    line.weigh(weights(1, 2), first=999)
    assert line.proposal["adopted"]
    assert line.stream.judgement is not None
    assert line.stream.judgement.baseline.sigma == pytest.approx(1.9, rel=0.1)


def gathered(count: int, subgroups: int = 1_000) -> Any:
    learner = Learner(LearnPlan(subgroups, 0, False, ()))
    for number in range(count):
        time = number * SECOND
        identity = (number, time, None, None)
        learner.add(Subgroup(number + 1, (1.0,), time, time, identity, False, 1, float(number)))
    return learner.material(())


def test_what_is_gathered_keeps_within_bounds() -> None:
    """Every other block of neighbours goes; what stays reaches over the whole time."""
    material = gathered(50_000)
    assert len(material) <= 2_000
    steps = [b - a for a, b in zip(material.mean, material.mean[1:], strict=False)]
    assert steps.count(1.0) >= 0.97 * len(steps)
    assert [bool(b) for b in material.broken[1:]] == [step != 1.0 for step in steps]
    assert material.mean[0] == 0
    assert material.mean[-1] > 45_000


def test_few_are_kept_whole() -> None:
    material = gathered(1_999)
    assert material.mean.tolist() == [float(each) for each in range(1_999)]
    assert not material.broken.any()
