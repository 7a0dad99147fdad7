"""``driftbell check`` on what was agreed: promises, budgets and what is to be caught."""

from __future__ import annotations

import copy
import json
import math
import random
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml
from plans import fresh, steps

from monitor.__main__ import main
from monitor.plan import CusumPlan

LINE: dict[str, Any] = {
    "version": 1,
    "broker": {"host": "localhost"},
    "outputs": {"root": "out"},
    "journal": {"path": "j.db"},
    "characteristics": {
        "weight": {
            "unit": "g",
            "source": {"topic": "scale", "payload": "number", "expected_rate": "600/min"},
            "subgroup": {"size": 5},
            "baseline": {"mean": 341.2, "sigma": 1.9, "sigma_between": 0.4},
            "promise": {"false_alarm_every": "14d"},
            "detectors": [{"kind": "cusum", "catch": 1.5, "ignore": 0.3}],
        }
    },
}


def check(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], *arguments: str, **changes: Any
) -> tuple[int, str, str]:
    """Exit status, words (or JSON) and errors for LINE with other keys in it."""
    line = copy.deepcopy(LINE)
    for key, value in changes.items():
        (line if key == "budget" else line["characteristics"]["weight"])[key] = value
    file = tmp_path / "line.yaml"
    file.write_text(yaml.safe_dump(line))
    status = main(["check", str(file), *arguments])
    out, err = capsys.readouterr()
    return status, out if arguments else " ".join(out.split()), err


def test_a_promise_in_words(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = check(tmp_path, capsys)
    assert status == 0
    assert "while off by no more than 0.30 g it rings once in 14 days (2,420,000 subgroups)" in out
    assert "one false alarm in 14d of all its streams and detectors together: one in 14" in out
    assert "catches a lasting drift of 1.50 g within" in out


def test_delays_are_those_of_the_engine(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Half of 4,000 simulated drifts, and nine tenths, are caught as soon as check says."""
    status, out, _ = check(tmp_path, capsys, "--json")
    (weight,) = json.loads(out)["characteristics"]
    (detector,) = weight["detectors"]
    assert status == 0
    scheme = CusumPlan("individual", detector["k"], detector["h"])
    chance, shift, delays = random.Random(7), 1.5 / detector["standard_error"], []
    for _ in range(4_000):
        judge, count = fresh(scheme), 1
        while not steps(judge, [chance.gauss(shift, 1)])[0]:
            count += 1
        delays.append(count)
    delays.sort()
    catches = detector["catches"]
    for key, at in (("half", 0.5), ("nine_of_ten", 0.9)):
        simulated = delays[round(at * len(delays)) - 1]
        assert catches[key]["subgroups"] == pytest.approx(simulated, abs=1)
        assert catches[key]["pieces"] == pytest.approx(5 * catches[key]["subgroups"])
        assert catches[key]["seconds"] == pytest.approx(0.5 * catches[key]["subgroups"])


def test_a_promise_that_written_constants_break(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    textbook = [{"kind": "shewhart", "width": 3}]
    status, out, err = check(tmp_path, capsys, detectors=textbook)
    assert status == 1
    assert "BROKEN: one false alarm in 14d was agreed, one in 3.1 min is foreseen" in out
    assert err == "driftbell check: it would ring more often than was agreed (see above)\n"


def test_constants_within_their_share(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Half the promise is the solved detector's; the other uses next to nothing of its half."""
    rare = [{"kind": "shewhart", "width": 7}, {"kind": "cusum", "catch": 1.5}]
    status, out, _ = check(tmp_path, capsys, "--json", detectors=rare)
    (weight,) = json.loads(out)["characteristics"]
    assert status == 0
    assert weight["promise"]["kept"] is True
    promise = weight["promise"]
    assert promise["foreseen"] == pytest.approx(2 * promise["seconds"], rel=0.01)


@pytest.mark.parametrize(("alerts", "status"), [(0.024, 0), (0.0235, 1)])
def test_the_budget(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], alerts: float, status: int
) -> None:
    """One in 14 d is 8 h / 14 d = 0.0238 in a shift."""
    budget = {"alerts": alerts, "per": "8h"}
    found, out, _ = check(tmp_path, capsys, budget=budget)
    assert found == status
    assert ("within the budget of" in out, "ABOVE THE BUDGET of" in out) == (not status, status)
    _, out, _ = check(tmp_path, capsys, "--json", budget=budget)
    said = json.loads(out)["budget"]
    assert said["foreseen"] == pytest.approx(8 / (14 * 24), rel=1e-3)
    assert said["kept"] is not bool(status)


def test_a_budget_over_another_time(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    budget = {"alerts": 1, "per": "7d"}
    _, out, _ = check(tmp_path, capsys, "--json", budget=budget)
    assert json.loads(out)["budget"]["foreseen"] == pytest.approx(0.5, rel=1e-3)


def test_delays_as_times_need_the_number_of_streams(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    source = {
        "topic": "scale/{head}",
        "payload": "number",
        "expected_rate": "600/min",
    }
    _, out, _ = check(tmp_path, capsys, source=source)
    assert "readings of its stream half the time" in out
    _, out, _ = check(tmp_path, capsys, "--json", source={**source, "expected_streams": 6})
    (weight,) = json.loads(out)["characteristics"]
    half = weight["detectors"][0]["catches"]["half"]
    assert half["seconds"] == pytest.approx(6 * 0.5 * half["subgroups"])


def test_pieces_between_subgroups_count(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Five in each minute are judged, a hundred pass."""
    source = {"topic": "scale", "payload": "number", "expected_rate": "100/min"}
    _, out, _ = check(
        tmp_path, capsys, "--json", source=source, subgroup={"size": 5, "every": "60s"}
    )
    (weight,) = json.loads(out)["characteristics"]
    half = weight["detectors"][0]["catches"]["half"]
    assert half["pieces"] == pytest.approx(100 * half["subgroups"])


def test_a_shewhart_chart_is_held_against_what_the_others_catch(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    detectors = [{"kind": "cusum", "catch": 1.5}, {"kind": "shewhart"}]
    _, out, _ = check(tmp_path, capsys, "--json", detectors=detectors)
    cusum, shewhart = json.loads(out)["characteristics"][0]["detectors"]
    assert shewhart["catches"]["drift"] == 1.5
    # Geometric: the median is ln 2 / −ln(1 − p).
    width, shift = shewhart["width"], 1.5 / cusum["standard_error"]
    p = 0.5 * (math.erfc((width - shift) / 2**0.5) + math.erfc((width + shift) / 2**0.5))
    median = math.log(0.5) / math.log1p(-p)
    assert shewhart["catches"]["half"]["subgroups"] == pytest.approx(median, rel=0.01)
    assert cusum["catches"]["half"]["subgroups"] < shewhart["catches"]["half"]["subgroups"]


def test_a_drift_that_is_caught_too_late_is_said_to_be(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    detectors = [{"kind": "cusum", "catch": 0.15}, {"kind": "shewhart"}]
    _, out, _ = check(tmp_path, capsys, detectors=detectors)
    said = "does not catch a lasting drift of 0.15 g in any useful time"
    assert out.count(said) == 1
    assert "catches a lasting drift of 0.15 g within" in out


def test_streams_that_will_never_be_judged(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    source = {
        "topic": "scale/{lane}",
        "payload": "number",
        "expected_rate": "600/min",
        "expected_streams": 4,
    }
    own = {"by_stream": {"lane=1": {"mean": 341, "sigma": 1.9}}}
    _, out, _ = check(tmp_path, capsys, source=source, baseline=own)
    assert "names 1 of the 4 streams that are expected: the others are never judged" in out
    own |= {"mean": 341, "sigma": 1.9}
    _, out, _ = check(tmp_path, capsys, source=source, baseline=own)
    assert "never judged" not in out


def test_a_spread_caught_slowly_is_caught_all_the_same(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A sum with far to go shows no chance of a signal for the first hundred subgroups."""
    slow = [{"kind": "cusum", "chart": "variance", "catch_ratio": 1.05}]
    status, out, _ = check(tmp_path, capsys, "--json", detectors=slow)
    (detector,) = json.loads(out)["characteristics"][0]["detectors"]
    half, nine = (detector["catches"][key]["subgroups"] for key in ("half", "nine_of_ten"))
    assert status == 0
    (planned,) = detector["sums"]
    chance = np.random.default_rng(4)
    sums, waits = np.zeros(1_000), np.zeros(1_000)
    for step in range(1, 3_000):
        sums = np.maximum(0, sums + 1.05**2 * chance.chisquare(4, sums.size) / 4 - planned["k"])
        waits[(sums > planned["h"]) & (waits == 0)] = step
    assert half == pytest.approx(np.median(waits), rel=0.06)
    assert nine == pytest.approx(np.quantile(waits, 0.9), rel=0.06)


def test_what_is_still_to_be_learned(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    baseline = {"learn": 1000, "over_at_least": "8h", "adopt": True}
    status, out, _ = check(tmp_path, capsys, baseline=baseline, budget={"alerts": 1})
    assert status == 0
    assert "learned of each stream from 1,000 subgroups over 8h or more" in out
    assert "proposed on out/baseline/weight" in out
    assert "one that may be trusted is judged by from then on, with cusum" in out
    assert "whether it is kept cannot be told yet" in out
    assert "whether the budget of 1 in 8h is kept cannot be told yet" in out
    assert "until then nobody is rung" in out
    assert "not counted: weight, which learns its baseline first" in out
