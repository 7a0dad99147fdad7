"""All configured detectors together: what the crew hears, how often, and how soon.

The counts are held against ``driftbell-replay play``, which reads the file again and knows nothing
of tuning.
"""

from __future__ import annotations

import copy
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
import yaml
from results import DAY, trustworthy
from tuned_line import ASKED, DOCUMENT, START, by_name, recording, steady, tune

from monitor.times import SECOND, format_time, parse_iso_time
from replay.__main__ import main
from replay.tuning.result import Extrapolated, Range, Setting
from replay.tuning.together import summed

ROWS = 12_000
DETECTORS: list[dict[str, Any]] = [
    {"kind": "cusum", "k": 0.5, "h": 4},
    {"kind": "shewhart", "chart": "mean", "rules": "western-electric-1956"},
    {"kind": "shewhart", "chart": "range"},
    {"kind": "cusum", "chart": "variance", "k": 1.46, "h": 5},
]


def configured(path: Path, detectors: list[dict[str, Any]], **keys: Any) -> str:
    document = copy.deepcopy(DOCUMENT)
    document["characteristics"]["net-weight"] |= {"detectors": detectors, **keys}
    path.write_text(yaml.safe_dump(document))
    return str(path)


def rung(capsys: pytest.CaptureFixture[str], config: str, path: str, folder: Path) -> int:
    """How often an alert was raised or came back in the last four tenths, by ``play``."""
    to = folder / "alerts.jsonl"
    assert main(["play", config, path, "--alerts", str(to)]) == 0
    capsys.readouterr()
    # The first reading of the subgroup that rings must lie in the last part.
    edge = START + round(0.6 * (ROWS - 1) * SECOND)
    events = [json.loads(line) for line in to.read_text().splitlines()]
    return sum(
        each["event"] in ("raised", "rejoined")
        and parse_iso_time(each["subgroup"]["first"]) >= edge
        for each in events
    )


@pytest.mark.parametrize(
    "subgroup", [{"size": 5, "max_gap": "30s"}, {"window": "20s", "min_size": 3}]
)
def test_the_crew_hears_what_play_rings(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, subgroup: dict[str, Any]
) -> None:
    """Charts of range and pattern rules among them, which are judged by no setting alone; head 1
    was heavy for a while, so that alerts stand open, and nobody said so."""
    values = steady(3)[:ROWS] + 0.4
    values[9_000:9_600:2] += 2.5
    path = recording(tmp_path / "line.csv", values)
    config = configured(tmp_path / "line.yaml", DETECTORS, subgroup=subgroup)
    expected = rung(capsys, config, path, tmp_path)
    now = tune(capsys, config, path, *ASKED, "--kind", "shewhart")["together"]
    assert now["false_alarms"]["seen"] == expected > 5
    assert now["signals"] > expected
    assert 0 < now["standing"] < 1
    names = ["cusum", "shewhart-mean", "shewhart-range", "cusum-variance"]
    assert now["detectors"] == names
    assert now["not_in_delays"] == names[1:3]
    assert now["keeps"] == "no"


def test_a_gauge_that_restarts(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """What was open is withdrawn there, and rings anew."""
    values = steady(5)[:ROWS]
    values[7_800:] += 2.0
    rows = ["time,head,sequence,value"]
    rows += [
        f"{format_time(START + place * SECOND)},{place % 2 + 1},{place % 9_000},{value:.1f}"
        for place, value in enumerate(values.tolist())
    ]
    path = tmp_path / "line.csv"
    path.write_text("\n".join(rows) + "\n")
    source = {**DOCUMENT["characteristics"]["net-weight"]["source"], "sequence": "/n"}
    config = configured(tmp_path / "line.yaml", DETECTORS[:1], source=source)
    expected = rung(capsys, config, str(path), tmp_path)
    now = tune(capsys, config, str(path), *ASKED, "--kind", "shewhart")["together"]
    assert now["false_alarms"]["seen"] == expected >= 4  # each head, before and after
    assert now["standing"] > 0.8


def test_two_detectors_on_one_excursion_are_one_alert(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    values = steady(1)[:ROWS]
    values[9_000:9_200:2] += 8.0
    path = recording(tmp_path / "line.csv", values)
    detectors = [
        {"kind": "cusum", "k": 1, "h": 8},
        {"kind": "shewhart", "chart": "mean", "width": 5},
        {"kind": "ewma", "lambda": 0.2, "width": 5},
    ]
    config = configured(tmp_path / "line.yaml", detectors)
    found = tune(capsys, config, path, *ASKED, "--kind", "shewhart")
    alone = [e for e in found["settings"] if e["origin"] == "configured"]
    assert all(each["false_alarms"]["seen"] >= 1 for each in alone)
    assert found["together"]["false_alarms"]["seen"] == 1
    assert found["together"]["signals"] == sum(each["false_alarms"]["seen"] for each in alone)


def test_what_catches_first_and_an_interval_that_holds(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """k 0.5, h 5 signals once in 465.4 subgroups (Lucas & Crosier 1982, as in methods.md), three
    and a half standard errors on two sides once in 2,149 (the normal integral): both together
    between once in 1 / (1/465.4 + 1/2149) = 382.5 and once in 465.4; subgroups come every 5 s."""
    path = recording(tmp_path / "line.csv", steady(2))
    detectors = [
        {"kind": "cusum", "k": 0.5, "h": 5},
        {"kind": "shewhart", "chart": "mean", "width": 3.5},
    ]
    config = configured(tmp_path / "line.yaml", detectors)
    found = tune(capsys, config, path, "--catch", "3", "--false-alarm-every", "1h")
    now, settings = found["together"], by_name(found)
    alone = [settings[f"as configured: {name}"] for name in ("cusum", "shewhart-mean")]
    assert now["interval"]["low"] < 5 * 382.5
    assert now["interval"]["high"] > 5 * 465.4
    assert now["interval"]["seconds"] < min(each["interval"]["seconds"] for each in alone)
    counted = now["false_alarms"]["interval"]
    assert counted["low"] < 5 * 465.4
    assert counted["high"] > 5 * 382.5
    assert [each["shape"] for each in now["delays"]] == ["step", "ramp", "spread"]
    for number, delay in enumerate(now["delays"]):
        others = [each["delays"][number] for each in alone]
        assert delay["caught"] >= max(each["caught"] for each in others)
        half = delay["readings"]["median"]["value"]
        least = [e["readings"]["median"]["value"] for e in others]
        assert half <= min(each for each in least if each is not None)
    assert len(now["curve"]) == len(alone[0]["curve"]) > 0


def test_a_line_never_at_rest_is_not_called_quiet(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """The baseline is 6 g off: one alert a head was raised before the last part, and stays."""
    path = recording(tmp_path / "line.csv", steady(4)[:ROWS] + 6.0)
    config = configured(tmp_path / "line.yaml", DETECTORS[:1])
    now = tune(capsys, config, path, *ASKED, "--kind", "shewhart")["together"]
    assert now["standing"] == 1
    assert now["keeps"] != "yes"
    assert now["interval"] is now["false_alarms"]["interval"] is None
    assert "stood open" in now["no_interval"]


def test_what_the_fragment_would_run_is_judged_against_its_own_baseline(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """The configured sigma is far too large, so that nothing rings today; with the fragment's, wild
    readings ring the charts that are kept, as ``play`` of it on the same recording says."""
    values = steady(3)[:ROWS]
    values[::151] += 12.0
    path = recording(tmp_path / "line.csv", values)
    detectors = [
        {"kind": "cusum", "catch": 1.5},
        {"kind": "shewhart", "chart": "mean"},
        {"kind": "cusum", "chart": "variance", "catch_ratio": 1.5},
    ]
    more = {"baseline": {"mean": 341.2, "sigma": 6.0}, "promise": {"false_alarm_every": "1h"}}
    source = {**DOCUMENT["characteristics"]["net-weight"]["source"], "expected_streams": 2}
    config = configured(tmp_path / "line.yaml", detectors, source=source, **more)
    best = tmp_path / "best.yaml"
    assert main(["tune", config, path, "--to", str(best), "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert found["together"]["false_alarms"]["seen"] == 0
    then = found["proposed"]
    keys = yaml.safe_load(best.read_text())["characteristics"]["net-weight"]
    proposed = configured(tmp_path / "then.yaml", **({"source": source} | keys))
    assert then["false_alarms"]["seen"] == rung(capsys, proposed, path, tmp_path) > 10
    assert then["detectors"] == ["cusum", "shewhart-mean", "cusum-variance"]
    assert then["keeps"] == "no"
    assert found["breaking"]
    said = " ".join(best.read_text().replace("\n# ", " ").split())
    assert "With this baseline it would have rung" in said
    assert "Caution: all of it together would have rung" in said


def test_no_baseline_nothing_runs_today(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = recording(tmp_path / "line.csv", steady(4)[:ROWS])
    config = configured(tmp_path / "line.yaml", DETECTORS[:1], baseline={"learn": 1000})
    assert tune(capsys, config, path, *ASKED, "--kind", "shewhart")["together"] is None


def told(low: float, high: float | None) -> Setting:
    (setting,) = trustworthy(1).settings
    return replace(setting, extrapolated=Extrapolated(2 * low, 2.0, Range(low, high)))


def test_rates_add_up_and_the_loudest_is_the_end() -> None:
    grouping = trustworthy().groupings[0]
    found, why = summed([told(3 * DAY, 12 * DAY), told(6 * DAY, None)], (), 0.0, grouping)
    assert not why
    assert found is not None
    assert (found.interval.low, found.interval.high) == pytest.approx((2 * DAY, 12 * DAY))
    assert found.seconds == pytest.approx(4 * DAY)
    bound, _ = summed([told(3 * DAY, None)] * 2, (), 0.0, grouping)
    assert bound is not None
    assert bound.interval.high is None


def test_one_without_an_interval_leaves_none_for_all() -> None:
    grouping = trustworthy().groupings[0]
    silent = replace(told(DAY, None), extrapolated=None, name="silent")
    assert summed([told(DAY, None), silent], (), 0.0, grouping) == (
        None,
        "there is none for silent",
    )
    found, why = summed([told(DAY, None)], ("shewhart-range",), 0.0, grouping)
    assert found is None
    assert "shewhart-range" in why
