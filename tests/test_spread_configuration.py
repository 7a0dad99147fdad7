"""Charts of spread in a configuration: from keys to plans, and every mistake with what to do."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor.__main__ import main
from monitor.configuration import catching
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import read_plan
from monitor.plan import CharacteristicPlan, CusumPlan, RulePlan, ShewhartPlan
from monitor.runlengths import solve_spread_chart, solve_variance


class Write:
    """Writes a configuration of one characteristic with one detector, and resolves it."""

    def __init__(self, folder: Path) -> None:
        self.file = folder / "line.yaml"

    def __call__(
        self, detector: dict[str, Any], subgroup: dict[str, Any] | None = None, **more: Any
    ) -> CharacteristicPlan:
        characteristic = {
            "source": {"topic": "line/weight", "payload": "number", "expected_rate": "600/min"},
            "subgroup": subgroup or {"size": 5},
            "baseline": {"mean": 341.2, "sigma": 1.9},
            "detectors": [detector],
            **more,
        }
        document = {"version": 1, "characteristics": {"weight": characteristic}}
        self.file.write_text(yaml.safe_dump(document))
        (plan,) = read_plan(self.file, {}).characteristics
        return plan


@pytest.fixture
def write(tmp_path: Path) -> Write:
    return Write(tmp_path)


def scheme(plan: CharacteristicPlan) -> object:
    assert plan.judgement is not None
    return plan.judgement.detectors[0].scheme


def revision(plan: CharacteristicPlan) -> str:
    assert plan.judgement is not None
    return plan.judgement.detectors[0].revision


OUTSIDE = (RulePlan("outside", width=3.0),)
PROMISE = {"false_alarm_every": "14d"}


@pytest.mark.parametrize("chart", ["range", "sd"])
def test_limits_of_spread_are_symmetric_unless_asked(write: Write, chart: Any) -> None:
    plain = {"kind": "shewhart", "chart": chart}
    assert scheme(write(plain)) == ShewhartPlan(chart, 3.0, OUTSIDE)
    assert scheme(write(plain | {"limits": "exact"})) == ShewhartPlan(
        chart, 3.0, OUTSIDE, exact=True
    )
    assert revision(write(plain)) == revision(write(plain | {"limits": "symmetric"}))
    assert revision(write(plain)) != revision(write(plain | {"limits": "exact"}))


def test_a_variances_are_always_exact(write: Write) -> None:
    plain = {"kind": "shewhart", "chart": "variance"}
    assert scheme(write(plain)) == ShewhartPlan("variance", 3.0, OUTSIDE, exact=True)
    assert revision(write(plain)) == revision(write(plain | {"limits": "exact"}))


def test_a_cusum_of_the_variance_watches_the_side_of_its_k(write: Write) -> None:
    wide = {"kind": "cusum", "chart": "variance", "k": 1.46, "h": 12}
    tight = {"kind": "cusum", "chart": "variance", "k": 0.65, "h": 5, "head_start": 0.5}
    assert scheme(write(wide)) == CusumPlan("variance", 1.46, 12, direction="up", size=5)
    assert scheme(write(tight)) == CusumPlan("variance", 0.65, 5, 0.5, direction="down", size=5)
    assert revision(write(wide)) == revision(write(wide | {"direction": "up"}))


def test_a_window_plans_for_as_many_readings_as_are_expected(write: Write) -> None:
    wide = {"kind": "cusum", "chart": "variance", "k": 1.46, "h": 12}
    found = scheme(write(wide, {"window": "2s", "min_size": 3}))
    assert found == CusumPlan("variance", 1.46, 12, direction="up", size=20)


def test_constants_are_worked_out_from_a_promise(write: Write) -> None:
    interval = 14 * 86_400 * 600 / 60 / 5
    for direction in ("both", "up", "down"):
        asked = {"kind": "cusum", "chart": "variance", "catch_ratio": 1.5, "direction": direction}
        found = scheme(write(asked, promise=PROMISE))
        assert found == solve_variance(1.5, interval, size=5, direction=direction)  # type: ignore[arg-type]
    ranges = {"kind": "shewhart", "chart": "range"}
    assert scheme(write(ranges, promise=PROMISE)) == solve_spread_chart("range", interval, 5)


def test_a_spread_that_shrinks_is_caught_as_soon_by_either_way_to_write_it(write: Write) -> None:
    caught = []
    for ratio in (1.4, 1 / 1.4):
        asked = {"kind": "cusum", "chart": "variance", "catch_ratio": ratio, "direction": "down"}
        plan = write(asked, promise=PROMISE)
        assert plan.judgement is not None
        caught.append(catching.of_detector(plan, plan.judgement.detectors[0]))
    assert caught[0] == caught[1]
    assert caught[0] is not None
    assert caught[0].ratio == pytest.approx(1 / 1.4)


CUSUM = {"kind": "cusum", "chart": "variance", "k": 1.46, "h": 12}
SHEWHART = {"kind": "shewhart"}


@pytest.mark.parametrize(
    ("detector", "key", "wrong", "instead"),
    [
        (SHEWHART | {"limits": "exact"}, "limits", "is for charts of spread", "leave limits out"),
        (SHEWHART | {"chart": "median", "limits": "symmetric"}, "limits", "of spread", "leave"),
        (
            SHEWHART | {"chart": "variance", "limits": "symmetric"},
            "limits",
            "far too often",
            "chart: sd",
        ),
        (SHEWHART | {"chart": "variance", "width": 11}, "width", "11 is more than 10", "smaller"),
        (
            SHEWHART
            | {
                "chart": "sd",
                "limits": "exact",
                "rules": [{"rule": "outside"}, {"rule": "outside", "width": 20}],
            },
            "rules[1].width",
            "20 is more than 10",
            "smaller",
        ),
        (
            SHEWHART | {"chart": "variance", "rules": "western-electric-1956"},
            "rules",
            "takes the rule outside only",
            "outside-limits",
        ),
        (CUSUM | {"k": 1.0}, "k", "is not above 1", "such as 1.46"),
        (CUSUM | {"k": 0.9, "direction": "up"}, "k", "is not above 1", "such as 1.46"),
        (CUSUM | {"k": 1.2, "direction": "down"}, "k", "below 1", "such as 0.65"),
        (CUSUM | {"direction": "both"}, "direction", "a k for each side", "up or down"),
        (CUSUM | {"clip": 3}, "clip", "would hide", "leave clip out"),
    ],
)
def test_each_mistake_is_named_with_what_to_do(
    write: Write, detector: dict[str, Any], key: str, wrong: str, instead: str
) -> None:
    with pytest.raises(ConfigurationError) as raised:
        write(detector)
    (problem,) = map(str, raised.value.problems)
    assert f"detectors[0].{key}: " in problem
    assert wrong in problem
    assert instead in problem


@pytest.mark.parametrize("detector", [CUSUM, SHEWHART | {"chart": "variance"}])
def test_one_reading_has_no_variance(write: Write, detector: dict[str, Any]) -> None:
    with pytest.raises(ConfigurationError, match="needs two readings or more"):
        write(detector, {"size": 1})


def test_a_shrinking_spread_is_not_caught_upwards(write: Write) -> None:
    asked = {"kind": "cusum", "chart": "variance", "catch_ratio": 0.7, "direction": "up"}
    with pytest.raises(ConfigurationError, match="direction: down"):
        write(asked, promise=PROMISE)


def test_symmetric_limits_keep_no_promise(write: Write) -> None:
    asked = {"kind": "shewhart", "chart": "range", "limits": "symmetric"}
    with pytest.raises(ConfigurationError, match="limits: exact, or a width"):
        write(asked, promise=PROMISE)


def test_check_says_it_in_words(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """All of it in the unit squared, and what each side is quickest for."""
    asked = {"kind": "cusum", "chart": "variance", "catch_ratio": 1.5, "head_start": 0.5}
    write(asked | {"direction": "both"}, promise=PROMISE, unit="g")
    document = yaml.safe_load(write.file.read_text())
    document |= {
        "broker": {"host": "localhost"},
        "outputs": {"root": "line/monitor"},
        "journal": {"path": "line.db"},
    }
    (weight,) = document["characteristics"].values()
    weight["detectors"] += [SHEWHART | {"chart": "variance"}, SHEWHART | {"chart": "range"}]
    write.file.write_text(yaml.safe_dump(document))
    assert main(["check", str(write.file)]) == 0
    said = " ".join(capsys.readouterr().out.split())
    assert "CUSUM of the variance of 5: what lies above 5.269 g² is summed up" in said
    assert "and what lies below 2.342 g² is summed up" in said
    assert "quickest for a spread 1.5 times the usual" in said
    assert "quickest for a spread 0.667 times the usual" in said
    assert "both sums start at" in said
    assert "catches a spread 1.5 times the usual within" in said
    assert "Shewhart chart of the variance of 5, centre 3.61 g², limits 0.00" in said
    assert "crossed as rarely as 5." in said
