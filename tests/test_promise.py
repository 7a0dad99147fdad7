"""A promise in the configuration: shared out, worked out, refused where it cannot be kept."""

from __future__ import annotations

import copy
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor import runlengths
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_settings
from monitor.plan import CharacteristicPlan, CusumPlan, EwmaPlan, ShewhartPlan

Change = Callable[[dict[str, Any]], object]

WEIGHT: dict[str, Any] = {
    "unit": "g",
    "source": {
        "topic": "plant/{lane}/scale",
        "payload": "json",
        "value": "/net",
        "stream": {"head": "/head"},
        "expected_rate": "600/min",
    },
    "subgroup": {"size": 5},
    "baseline": {"mean": 341.2, "sigma": 1.9, "sigma_between": 0.4},
    "promise": {"false_alarm_every": "14d"},
    "detectors": [
        {"kind": "cusum", "catch": 1.5, "ignore": 0.3},
        {"kind": "shewhart", "chart": "mean"},
    ],
}
SUBGROUPS = 14 * 86_400 * 2
"""In 14 days: 600 readings a minute in fives are two subgroups a second."""

ERROR = (0.4**2 + 1.9**2 / 5) ** 0.5


@pytest.fixture
def resolved(tmp_path: Path) -> Callable[..., CharacteristicPlan]:
    """The plan of WEIGHT after a change."""

    def make(change: Change = lambda _: None) -> CharacteristicPlan:
        weight = copy.deepcopy(WEIGHT)
        change(weight)
        file = tmp_path / "line.yaml"
        document = {
            "version": 1,
            "broker": {"host": "localhost"},
            "outputs": {"root": "out"},
            "journal": {"path": "j.db"},
            "characteristics": {"weight": weight},
        }
        file.write_text(yaml.safe_dump(document, sort_keys=False))
        return read_settings(file, {}).plan.characteristics[0]

    return make


Resolved = Callable[..., CharacteristicPlan]


def scheme(plan: CharacteristicPlan, index: int = 0) -> Any:
    return plan.example()[1].detectors[index].scheme


def interval(plan: CharacteristicPlan, index: int) -> float:
    intent = plan.example()[1].detectors[index].intent
    assert intent is not None
    return intent.interval


def detectors(*given: dict[str, Any]) -> Change:
    return lambda weight: weight.__setitem__("detectors", list(given))


def test_the_promise_is_shared_out_and_kept(resolved: Resolved) -> None:
    """Two detectors, half the false alarms each: rates add, so each rings once in 28 days; the
    CUSUM so rarely even while the mean is off by what it is to ignore."""
    plan = resolved()
    cusum, shewhart = scheme(plan, 0), scheme(plan, 1)
    assert interval(plan, 0) == interval(plan, 1) == pytest.approx(2 * SUBGROUPS)
    assert isinstance(cusum, CusumPlan)
    assert cusum.k == pytest.approx((1.5 + 0.3) / 2 / ERROR)
    off = runlengths.run_length(cusum, 0.3 / ERROR).subgroups
    assert off == pytest.approx(2 * SUBGROUPS, rel=1e-5)
    assert isinstance(shewhart, ShewhartPlan)
    assert runlengths.run_length(shewhart).subgroups == pytest.approx(2 * SUBGROUPS, rel=1e-6)
    assert [rule.rule for rule in shewhart.rules] == ["outside"]
    assert shewhart.rules[0].width == shewhart.width


def test_shares_are_weights_over_all_detectors(resolved: Resolved) -> None:
    plan = resolved(
        detectors(
            {"kind": "cusum", "catch": 1.5, "share": 3},
            {"kind": "ewma", "catch": 1.5},
            {"kind": "shewhart", "width": 5, "chart": "mean", "share": 2},
        )
    )
    assert interval(plan, 0) == pytest.approx(2 * SUBGROUPS)
    assert interval(plan, 1) == pytest.approx(6 * SUBGROUPS)
    assert plan.example()[1].detectors[2].intent is None
    ewma = scheme(plan, 1)
    assert isinstance(ewma, EwmaPlan)
    assert runlengths.run_length(ewma).subgroups == pytest.approx(6 * SUBGROUPS, rel=1e-4)


@pytest.mark.parametrize("direction", ["up", "down", "both"])
@pytest.mark.parametrize("head_start", [0.0, 0.5])
def test_sides_and_head_starts_are_counted(
    resolved: Resolved, direction: str, head_start: float
) -> None:
    """A head start costs false alarms at every restart: the interval holds with it."""
    given = {"kind": "cusum", "catch": 1.5, "direction": direction, "head_start": head_start}
    cusum = scheme(resolved(detectors(given)))
    assert runlengths.run_length(cusum).subgroups == pytest.approx(SUBGROUPS, rel=1e-5)
    assert (cusum.direction, cusum.head_start) == (direction, head_start)


def test_what_comes_with_an_intent_is_kept(resolved: Resolved) -> None:
    given = {"kind": "cusum", "catch": 1.5, "clip": 3, "after_signal": "hold"}
    cusum = scheme(resolved(detectors(given)))
    assert (cusum.clip, cusum.hold) == (3, True)
    given = {"kind": "ewma", "catch": 1.5, "clip": 3, "limits": "asymptotic"}
    ewma = scheme(resolved(detectors(given)))
    assert (ewma.clip, ewma.asymptotic) == (3, True)
    # A clip makes signals rarer: the promise is met with it, not exceeded.
    assert runlengths.run_length(cusum).subgroups == pytest.approx(SUBGROUPS, rel=1e-4)
    assert runlengths.run_length(ewma).subgroups == pytest.approx(SUBGROUPS, rel=2e-3)


@pytest.mark.parametrize("ignore", [0.0, 0.3])
def test_a_solved_cusum_is_as_quick_as_any_can_be(resolved: Resolved, ignore: float) -> None:
    """G. V. Moustakides 1986: none with the same interval is quicker, within 1 %."""
    cusum = scheme(resolved(detectors({"kind": "cusum", "catch": 1.5, "ignore": ignore})))
    shift = 1.5 / ERROR
    floor = runlengths.floor(shift, SUBGROUPS, ignore=ignore / ERROR)
    assert runlengths.run_length(cusum, shift).subgroups == pytest.approx(floor, rel=0.01)


def test_each_stream_by_its_own_sigma(resolved: Resolved) -> None:
    own = {
        "head=1;lane=1": {"mean": 341, "sigma": 1.0},
        "head=2;lane=1": {"mean": 342, "sigma": 4.0},
    }
    plan = resolved(lambda weight: weight.__setitem__("baseline", {"by_stream": own}))
    first, second = (judgement.detectors[0].scheme for judgement in plan.by_stream.values())
    assert isinstance(first, CusumPlan)
    assert isinstance(second, CusumPlan)
    assert first.k == pytest.approx(4 * second.k)
    for each, sigma in ((first, 1.0), (second, 4.0)):
        off = runlengths.run_length(each, 0.3 / (sigma / 5**0.5)).subgroups
        assert off == pytest.approx(2 * SUBGROUPS, rel=1e-5)


def test_a_drift_that_any_single_reading_shows(resolved: Resolved) -> None:
    """Thirteen standard errors: it is caught at once, and the promise is kept all the same."""
    cusum = scheme(resolved(detectors({"kind": "cusum", "catch": 12})))
    assert runlengths.run_length(cusum).subgroups == pytest.approx(SUBGROUPS, rel=1e-5)
    assert runlengths.run_length(cusum, 12 / ERROR).subgroups == pytest.approx(1, abs=1e-9)


def test_medians_have_their_own_tails(resolved: Resolved) -> None:
    plan = resolved(detectors({"kind": "shewhart", "chart": "median"}))
    assert runlengths.run_length(scheme(plan), size=5).subgroups == pytest.approx(SUBGROUPS)


@pytest.mark.parametrize("chart", ["range", "sd", "variance"])
def test_charts_of_spread_have_their_own_tails(resolved: Resolved, chart: str) -> None:
    """Not three sigma: at these intervals a range is far from normal."""
    found = scheme(resolved(detectors({"kind": "shewhart", "chart": chart})))
    assert (found.chart, found.exact) == (chart, True)
    assert runlengths.run_length(found, size=5).subgroups == pytest.approx(SUBGROUPS, rel=1e-4)


@pytest.mark.parametrize(
    ("ratio", "written", "watched"),
    [(1.5, {}, "up"), (0.5, {}, "down"), (1.5, {"direction": "both"}, "both")],
)
def test_a_spread_worth_catching(
    resolved: Resolved, ratio: float, written: dict[str, str], watched: str
) -> None:
    """Without a direction, the side that the ratio names."""
    given = {"kind": "cusum", "chart": "variance", "catch_ratio": ratio, **written}
    found = scheme(resolved(detectors(given)))
    assert found.direction == watched
    assert runlengths.run_length(found, size=5).subgroups == pytest.approx(SUBGROUPS, rel=1e-3)
    caught = runlengths.run_length(found, size=5, ratio=ratio).subgroups
    assert caught < 60


def test_single_readings(resolved: Resolved) -> None:
    def change(weight: dict[str, Any]) -> None:
        weight["subgroup"] = {"size": 1}
        weight["detectors"] = [{"kind": "cusum", "catch": 1.5}]

    plan = resolved(change)
    assert scheme(plan).chart == "individual"
    assert interval(plan, 0) == pytest.approx(14 * 86_400 * 10)


def test_windows_need_to_know_how_many_streams(resolved: Resolved) -> None:
    def change(weight: dict[str, Any]) -> None:
        weight["subgroup"] = {"window": "60s", "min_size": 3}

    with pytest.raises(ConfigurationError) as caught:
        resolved(change)
    (problem,) = caught.value.problems
    assert problem.key == "characteristics.weight.promise.false_alarm_every"
    assert "expected_streams: in source, such as 6" in problem.instead

    def with_streams(weight: dict[str, Any]) -> None:
        change(weight)
        weight["source"]["expected_streams"] = 6

    plan = resolved(with_streams)
    assert interval(plan, 0) == pytest.approx(2 * 14 * 24 * 60 * 6)
    intent = plan.example()[1].detectors[0].intent
    assert intent is not None
    assert intent.size == 100  # 600 a minute over six streams


def test_windows_need_to_know_how_many_readings(resolved: Resolved) -> None:
    """What is to be caught and ignored is told by standard errors of what a window holds."""

    def change(weight: dict[str, Any]) -> None:
        weight["subgroup"] = {"window": "60s", "min_size": 3}
        weight["source"]["expected_streams"] = 6
        del weight["source"]["expected_rate"]

    with pytest.raises(ConfigurationError) as caught:
        resolved(change)
    (problem,) = caught.value.problems
    assert problem.key == "characteristics.weight.promise.false_alarm_every"
    assert "expected_rate: in source" in problem.instead


def own_for_two(weight: dict[str, Any]) -> None:
    weight["source"]["expected_streams"] = 6
    own = {f"head={head};lane=1": {"mean": 341.2, "sigma": 1.9} for head in (1, 2)}
    weight["baseline"] = {"by_stream": own}


def test_streams_that_are_not_judged_share_the_readings(resolved: Resolved) -> None:
    """Two of six streams are judged: a third of the subgroups, and of the readings in windows."""
    plan = resolved(own_for_two)
    assert interval(plan, 0) == pytest.approx(2 * SUBGROUPS / 3)

    def windows(weight: dict[str, Any]) -> None:
        own_for_two(weight)
        weight["subgroup"] = {"window": "60s", "min_size": 3}

    plan = resolved(windows)
    intent = plan.example()[1].detectors[0].intent
    assert intent is not None
    assert intent.size == 100
    assert interval(plan, 0) == pytest.approx(2 * 14 * 24 * 60 * 2)


def test_streams_that_will_have_learned_count(resolved: Resolved) -> None:
    def change(weight: dict[str, Any]) -> None:
        own_for_two(weight)
        weight["baseline"] |= {"learn": 1000, "adopt": True}
        weight["subgroup"] = {"window": "60s", "min_size": 3}

    assert interval(resolved(change), 0) == pytest.approx(2 * 14 * 24 * 60 * 6)


REFUSED: list[tuple[str, Change, str, str, str]] = [
    (
        "no promise",
        lambda w: w.pop("promise"),
        "detectors[0].catch",
        "no promise to work constants out from",
        "promise: {false_alarm_every: 14d}",
    ),
    (
        "no rate",
        lambda w: w["source"].pop("expected_rate"),
        "promise.false_alarm_every",
        "nobody wrote down how many readings",
        "expected_rate: in source",
    ),
    (
        "constants and intent",
        lambda w: w["detectors"][0].update(k=0.5),
        "detectors[0].k",
        "stands beside catch",
        "keep catch or k and h",
    ),
    (
        "ignoring without catching",
        detectors({"kind": "cusum", "k": 0.5, "h": 5, "ignore": 0.3}),
        "detectors[0].ignore",
        "has no catch beside it",
        "write catch: too",
    ),
    (
        "ignoring all that is caught",
        detectors({"kind": "ewma", "catch": 0.3, "ignore": 0.3}),
        "detectors[0].ignore",
        "is not less than catch",
        "a larger one to catch",
    ),
    (
        "ewma constants and intent",
        detectors({"kind": "ewma", "catch": 0.3, "lambda": 0.2}),
        "detectors[0].lambda",
        "stands beside catch",
        "keep catch or lambda and width",
    ),
    (
        "a ratio for the mean",
        detectors({"kind": "cusum", "catch_ratio": 1.5}),
        "detectors[0].catch_ratio",
        "is for the spread",
        "chart: variance",
    ),
    (
        "rules that ring as they do",
        detectors({"kind": "shewhart", "rules": "western-electric-1956"}),
        "detectors[0].rules",
        "ring as often as they do",
        "write width: 3 too",
    ),
    (
        "a drift too small for any sum",
        detectors({"kind": "cusum", "catch": 0.001}),
        "detectors[0].catch",
        "cannot be told from nothing wrong",
        "gather larger subgroups",
    ),
    (
        "a clip below k",
        detectors({"kind": "cusum", "catch": 7, "clip": 3}),
        "detectors[0].clip",
        "leaves too little above the k",
        "leave it out",
    ),
    (
        "an average that never gets there",
        detectors({"kind": "ewma", "catch": 9, "clip": 0.05}),
        "detectors[0].clip",
        "no average could ever reach its limit",
        "leave it out",
    ),
    (
        "two clipped sums that both begin high",
        detectors({"kind": "cusum", "catch": 0.6, "clip": 3, "head_start": 0.99}),
        "detectors[0].head_start",
        "lets both sums begin so high",
        "write 0.5 or less",
    ),
    (
        "two sums that both begin high",
        detectors(
            {
                "kind": "cusum",
                "chart": "variance",
                "catch_ratio": 1.5,
                "direction": "both",
                "head_start": 0.9,
            }
        ),
        "detectors[0].head_start",
        "both sums would be high at first",
        "such as 0.5",
    ),
    (
        "a promise to ring all the time",
        lambda w: w["promise"].update(false_alarm_every="500ms"),
        "detectors[0]",
        "is to ring so often",
        "longer promise.false_alarm_every",
    ),
    (
        "no time",
        lambda w: w["promise"].update(false_alarm_every="0s"),
        "promise.false_alarm_every",
        "is no time at all",
        "14d",
    ),
    (
        "a share of nothing",
        lambda w: w["detectors"][0].update(share=0),
        "detectors[0].share",
        "is not above 0",
        "such as 2",
    ),
]


@pytest.mark.parametrize(
    ("change", "key", "wrong", "instead"), [r[1:] for r in REFUSED], ids=[r[0] for r in REFUSED]
)
def test_refused(resolved: Resolved, change: Change, key: str, wrong: str, instead: str) -> None:
    with pytest.raises(ConfigurationError) as caught:
        resolved(change)
    problem = caught.value.problems[0]
    assert problem.key == f"characteristics.weight.{key}"
    assert wrong in problem.wrong
    assert instead in problem.instead
    assert problem.line is not None


def revisions(plan: CharacteristicPlan) -> list[str]:
    return [each.revision for each in plan.example()[1].detectors]


def test_revisions_hash_what_is_declared(resolved: Resolved) -> None:
    """The promise and the share decide; what others get, or what was worked out, does not."""
    plan = resolved()
    first, second = revisions(plan)
    longer = revisions(resolved(lambda w: w["promise"].update(false_alarm_every="28d")))
    assert first != longer[0]
    assert second != longer[1]
    shared = revisions(resolved(lambda w: w["detectors"][1].update(share=2)))
    assert (shared[0] == first, shared[1] == second) == (True, False)
    assert interval(resolved(lambda w: w["detectors"][1].update(share=2)), 0) != interval(plan, 0)
    as_default = resolved(lambda w: w["detectors"][0].update(share=1, head_start=0))
    assert revisions(as_default) == [first, second]


def test_written_constants_do_not_hang_on_the_promise(resolved: Resolved) -> None:
    constants = {"kind": "cusum", "k": 0.5, "h": 5}
    beside = resolved(detectors({**constants, "share": 2}))
    without = resolved(lambda w: (w.pop("promise"), detectors(constants)(w)))
    assert revisions(beside) == revisions(without)
