"""``driftbell-replay tune`` as its user runs it: what it answers, writes and refuses."""

from __future__ import annotations

import copy
import csv
import hashlib
import json
import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml
from tuned_line import ASKED, DOCUMENT, ROWS, START, by_name, recording, steady, tune

from monitor.__main__ import main as driftbell
from monitor.configuration import spans
from monitor.times import SECOND, format_time, parse_iso_time
from replay.__main__ import main


@pytest.fixture(scope="module")
def config(tmp_path_factory: pytest.TempPathFactory) -> str:
    path = tmp_path_factory.mktemp("config") / "line.yaml"
    path.write_text(yaml.safe_dump(DOCUMENT))
    return str(path)


@pytest.fixture(scope="module")
def week(tmp_path_factory: pytest.TempPathFactory) -> str:
    return recording(tmp_path_factory.mktemp("recording") / "week.csv", steady())


def test_the_whole_answer(capsys: pytest.CaptureFixture[str], config: str, week: str) -> None:
    found = tune(capsys, config, week, *ASKED, "--size", "5,10", "--cusum", "0.5,5")
    digest = hashlib.sha256(Path(week).read_bytes()).hexdigest()
    assert found["recordings"] == [{"name": week, "sha256": digest}]
    assert found["trusted"]
    assert found["recording"]["readings"] == ROWS
    assert found["recording"]["running_seconds"] == ROWS - 1
    assert found["recording"]["streams"] == {"head=1": ROWS // 2, "head=2": ROWS // 2}
    assert [each["size"] for each in found["groupings"]] == [5, 10]
    settings = by_name(found)
    assert set(settings) == {
        *(f"{name}, size {n}" for n in (5, 10) for name in ("shewhart", "cusum 0.5,5")),
        *(f"{kind}, catch 1.5, size {n}" for n in (5, 10) for kind in ("cusum", "ewma")),
        "as configured: cusum",
    }
    ranks = [each["rank"] for each in found["settings"] if each["rank"] is not None]
    assert ranks == list(range(1, len(ranks) + 1))
    late = [e["delays"][0]["readings"]["late"]["value"] for e in found["settings"][: len(ranks)]]
    assert late == sorted(late)
    assert found["best"]["name"] == found["settings"][0]["name"]
    for each in found["settings"]:
        assert each["meets"] or each["rank"] is None
        assert [d["shape"] for d in each["delays"]] == ["step", "ramp", "spread"]
        assert each["delays"][0]["onsets"] >= 200
    assert found["settings"][0]["interval"]["low"] >= found["false_alarm_every"] == 86_400
    # k 0.5, h 5 signals about once in 465 subgroups (methods.md): the textbook's own data.
    given = settings["cusum 0.5,5, size 5"]
    told = given["interval"]
    seconds = 465.4 / 0.2
    assert told["low"] < seconds < told["high"]
    assert given["false_alarms"]["interval"]["low"] < seconds
    assert seconds < given["false_alarms"]["interval"]["high"]
    assert not given["meets"]
    assert not found["settings"][0]["interval"]["counted"]
    assert "the configured detector shewhart-range" in [each["what"] for each in found["refused"]]


def test_configured_settings_ring_as_play_does(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    """The engine's own signals in the last four tenths, from ``play``, are those counted; the
    mean is not quite the baseline's."""
    path = recording(tmp_path / "short.csv", steady(3)[:12_000] + 0.4)
    points = tmp_path / "points.csv"
    assert main(["play", config, path, "--points", str(points)]) == 0
    capsys.readouterr()
    edge = START + round(0.6 * 11_999 * SECOND)
    with points.open() as file:
        rows = [row for row in csv.DictReader(file) if row["detector"] == "cusum" and row["rule"]]
    # Subgroups of five that begin after the edge end eight seconds later or more.
    expected = [row for row in rows if parse_iso_time(row["time"]) >= edge + 8 * SECOND]
    found = by_name(tune(capsys, config, path, *ASKED, "--kind", "cusum"))["as configured: cusum"]
    assert found["false_alarms"]["seen"] == len(expected) > 2


def test_the_same_seed_gives_the_same_answer(
    capsys: pytest.CaptureFixture[str], config: str, week: str
) -> None:
    asked = (config, week, *ASKED, "--kind", "shewhart")
    first, again, other = (
        tune(capsys, *asked, "--seed", seed, "--jobs", jobs)
        for seed, jobs in (("4", "1"), ("4", "2"), ("5", "1"))
    )
    assert first == again
    assert first["settings"][0]["constants"] == other["settings"][0]["constants"]
    name = "as configured: cusum"
    assert by_name(first)[name]["delays"] != by_name(other)[name]["delays"]


def test_questions_in_the_readers_order(
    capsys: pytest.CaptureFixture[str], config: str, week: str
) -> None:
    assert main(["tune", config, week, *ASKED]) == 0
    out = capsys.readouterr().out
    questions = [line for line in out.splitlines() if line.endswith("?")]
    assert questions == [
        "May I trust this recording?",
        "What would have rung with nothing wrong?",
        "How late would it catch a drift?",
        "What was refused, and why?",
        "What do I put into the configuration?",
    ]


def test_a_pair_that_is_left_out_is_said(
    capsys: pytest.CaptureFixture[str], config: str, week: str
) -> None:
    """Decimal commas are read as lists."""
    asked = [*ASKED[2:], "--kind", "cusum", "--catch", "1,5", "--ignore", "0,3"]
    assert main(["tune", config, week, *asked]) == 0
    said = capsys.readouterr().err
    assert "catch 1 is not tried with ignore 3, which is not smaller" in said
    assert said.count("is not tried") == 1


def test_an_interval_by_the_count_is_marked(
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
    config: str,
    week: str,
) -> None:
    monkeypatch.setenv("COLUMNS", "200")
    assert main(["tune", config, week, *ASKED, "--kind", "cusum", "--cusum", "0.5,2"]) == 0
    rows = capsys.readouterr().out.splitlines()
    (often,) = [row for row in rows if "cusum 0.5,2" in row and "k 0.5" in row]
    (seldom,) = [row for row in rows if "cusum, catch 1.5" in row and "k " in row]
    assert "(counted)" in often
    assert "(counted)" not in seldom


def test_what_could_be_promised_is_said(
    capsys: pytest.CaptureFixture[str], config: str, week: str
) -> None:
    asked = [*ASKED, "--kind", "shewhart", "--cusum", "0.5,6"]
    assert main(["tune", config, week, *asked]) == 0
    out = " ".join(capsys.readouterr().out.split())
    found = tune(capsys, config, week, *asked)
    assert found["best"] is None
    name = "cusum 0.5,6, size 5"
    longest = by_name(found)[name]["interval"]["low"]
    said = f"shown of one that does catch them is {spans.long(longest)}, of {name}."
    assert said in out


def changed(path: Path, **keys: Any) -> str:
    """The line's configuration with other keys of its characteristic, in a file."""
    document = copy.deepcopy(DOCUMENT)
    document["characteristics"]["net-weight"] |= keys
    path.write_text(yaml.safe_dump(document))
    return str(path)


def keys_of(fragment: Path) -> dict[str, Any]:
    (keys,) = yaml.safe_load(fragment.read_text())["characteristics"].values()
    found: dict[str, Any] = keys
    return found


INTENDED: dict[str, Any] = {
    "promise": {"false_alarm_every": "14d"},
    "detectors": [
        {"kind": "shewhart", "chart": "mean"},
        {"kind": "cusum", "catch": 3, "ignore": 2, "share": 2},
        {"kind": "cusum", "chart": "variance", "catch_ratio": 1.5},
        {"kind": "ewma", "name": "slow", "lambda": 0.1, "width": 1.5},
    ],
}


@pytest.mark.parametrize("kind", ["cusum", "ewma"])
def test_check_accepts_the_fragment_which_keeps_the_other_detectors(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str, kind: str
) -> None:
    """One promise for all: that which was asked for, shared out as before. CUSUMs are for the
    spread too."""
    source = {**DOCUMENT["characteristics"]["net-weight"]["source"], "expected_streams": 6}
    config = changed(tmp_path / "line.yaml", source=source, **INTENDED)
    fragment = tmp_path / "best.yaml"
    arguments = ["--catch", "1.5", "--false-alarm-every", "6h", "--kind", kind, "--size", "10"]
    assert main(["tune", config, week, *arguments, "--to", str(fragment)]) == 0
    out = capsys.readouterr().out
    keys = keys_of(fragment)
    assert keys["subgroup"] == {"size": 10, "max_gap": "30s"}
    assert keys["promise"] == {"false_alarm_every": "6h"}
    kept, new, spread = keys["detectors"]
    assert kept == INTENDED["detectors"][0]
    # Its share is that of the two it replaces, so that the others' part of the promise stays.
    assert (new["kind"], new["share"]) == (kind, 3)
    said = ["The promise is one false alarm in 6 h instead of 14 days, of all detectors together."]
    if kind == "cusum":
        assert (spread["chart"], "share" in spread, spread["h"] > 0) == ("variance", False, True)
        said.append("They replace cusum, slow and cusum-variance and keep shewhart-mean.")
        said.append("size 10 to one in 10 h; cusum, catch_ratio 1.5, size 10 to")
        said.append("The limits of shewhart-mean are worked out from what the promise leaves them")
    else:
        assert spread == INTENDED["detectors"][2]
        said.append("It replaces cusum and slow and keeps shewhart-mean and cusum-variance.")
    said.append("The recording holds 2 streams; any other (6 are expected) is held against")
    said.append("a file: or learn: too")
    for text in said:
        assert text in " ".join(out.split())
        assert text in " ".join(fragment.read_text().replace("\n# ", " ").split())
    baseline = keys["baseline"]
    own = list(baseline["by_stream"].values())
    assert len(own) == 2
    assert baseline["mean"] == pytest.approx(np.mean([each["mean"] for each in own]), abs=1e-3)
    sigma = np.sqrt(np.mean([each["sigma"] ** 2 for each in own]))
    assert baseline["sigma"] == pytest.approx(sigma, abs=1e-3)
    merged = changed(tmp_path / "merged.yaml", source=source, **INTENDED | keys)
    capsys.readouterr()
    assert driftbell(["check", merged, "--json"]) == 0
    (checked,) = json.loads(capsys.readouterr().out)["characteristics"]
    assert checked["promise"]["seconds"] == 6 * 3_600
    assert checked["promise"]["kept"] is True


def test_a_kept_chart_must_fit_the_subgroup(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str, week: str
) -> None:
    fragment = tmp_path / "best.yaml"
    arguments = ["--catch", "1.5", "--false-alarm-every", "6h", "--kind", "cusum", "--size", "1"]
    assert main(["tune", config, week, *arguments, "--to", str(fragment)]) == 0
    assert [each["kind"] for each in keys_of(fragment)["detectors"]] == ["cusum"]
    out = " ".join(capsys.readouterr().out.split())
    assert "shewhart-range is left out: a chart of range needs two readings or more" in out


def test_the_new_detector_takes_no_name_that_stays(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str
) -> None:
    detectors = [{"kind": "shewhart", "chart": "range", "name": "cusum"}]
    config = changed(tmp_path / "line.yaml", detectors=detectors)
    fragment = tmp_path / "best.yaml"
    assert main(["tune", config, week, *ASKED, "--kind", "cusum", "--to", str(fragment)]) == 0
    new, kept = keys_of(fragment)["detectors"]
    assert (new["name"], kept["name"]) == ("tuned", "cusum")
    merged = changed(tmp_path / "merged.yaml", **keys_of(fragment))
    assert driftbell(["check", merged]) == 0


def test_what_stands_there_and_does_best_is_left_alone(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str
) -> None:
    """A Shewhart chart of means is far too late for 1.5 g, which the CUSUM that stands catches."""
    detectors = [{"kind": "cusum", "k": 0.85, "h": 5.5}, {"kind": "shewhart", "chart": "range"}]
    config = changed(tmp_path / "line.yaml", detectors=detectors)
    fragment = tmp_path / "best.yaml"
    asked = ["--catch", "1.5", "--false-alarm-every", "1h", "--kind", "shewhart"]
    assert main(["tune", config, week, *asked, "--to", str(fragment)]) == 0
    assert "Nothing need change: cusum, as it stands in net-weight" in capsys.readouterr().out
    assert keys_of(fragment) == {"detectors": detectors}


def test_a_promise_longer_than_the_recording_supports(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str, week: str
) -> None:
    """The last part lasts 2.8 h: 50 times that are 5.8 days."""
    to = tmp_path / "best.yaml"
    asked = [config, week, "--catch", "1.5", "--kind", "cusum", "--to", str(to)]
    assert main(["tune", *asked, "--false-alarm-every", "6d", "--json"]) == 1
    out, said = capsys.readouterr()
    found = json.loads(out)
    assert found["best"] is None
    assert found["groupings"][0]["supports"] == pytest.approx(50 * 0.4 * ROWS, rel=0.01)
    assert any("a promise of 6 days" in each["what"] for each in found["refused"])
    assert not to.exists()
    assert "was not written" in said
    assert all(each["interval"]["low"] <= 50 * 0.4 * ROWS for each in found["settings"])
    assert {each["keeps"] for each in found["settings"]} <= {"no", "not shown"}
    # It joins a chart of range, so half of the promise is its part: 12 days / 50 / 0.4 are 14.4 h.
    assert any("about 14 h of recording for 12 days" in e["instead"] for e in found["refused"])
    assert main(["tune", *asked, "--false-alarm-every", "2d"]) == 0
    assert to.exists()


@pytest.mark.parametrize("moving", [[0], [0, 1]])
@pytest.mark.parametrize("at", [0.05, 0.5, 0.8, 0.95])
def test_no_interval_where_a_stream_moved_and_stayed(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str, at: float, moving: list[int]
) -> None:
    values = steady().reshape(-1, 2)
    begun = round(len(values) * at)
    values[begun:, moving] -= 2
    path = recording(tmp_path / "moved.csv", values.ravel())
    found = tune(capsys, config, path, *ASKED, "--kind", "cusum", "--size", "5,10")
    assert not found["trusted"]
    assert found["trust"].startswith("No: the centre moved and stayed away: head=")
    assert found["best"] is None
    assert all(each["interval"] is None for each in found["settings"])
    for way in found["groupings"]:
        moved = way["wander"]["moved"]
        assert {each["stream"] for each in moved} == {f"head={head + 1}" for head in moving}
        for each in moved:
            assert each["by"] == pytest.approx(-2, abs=0.5)
            assert each["share"] == pytest.approx(min(at, 1 - at), abs=0.01)
            off = parse_iso_time(each["time"]) - (START + 2 * begun * SECOND)
            assert abs(off) <= 120 * SECOND
    (refused,) = (each for each in found["refused"] if each["what"].startswith("any interval"))
    assert "g from about 2026-03-02T" in refused["why"]
    # What it says to do makes the recording of use.
    begin, end = re.findall(r"(?:from|until) (\S+Z)", refused["instead"])
    events = tmp_path / "events.csv"
    events.write_text(f"time,what,until\n{begin},cause,{end}\n")
    if at != 0.5:
        labelled = tune(capsys, config, path, *ASKED, "--kind", "cusum", "--events", str(events))
        assert labelled["trusted"]


@pytest.mark.parametrize(("length", "taken"), [(900, False), (100, True)])
def test_a_gauge_that_stood_still_is_named(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str, length: int, taken: bool
) -> None:
    """Head 1 reads every other second."""
    values = steady()
    values[8_000 : 8_000 + 2 * length : 2] = values[8_000]
    path = recording(tmp_path / "stuck.csv", values)
    found = tune(capsys, config, path, *ASKED, "--kind", "cusum")
    assert "stood still" in found["trust"]
    assert found["trusted"] is taken
    assert (found["best"] is not None) is taken
    (refused,) = (each for each in found["refused"] if "stood still" in each["why"])
    assert f"the gauge of head=1 stood still: {length} readings in a row" in refused["why"]
    begin, end = re.findall(r"(?:from|until) (\S+Z)", refused["instead"])
    assert parse_iso_time(begin) == START + 8_000 * SECOND
    assert parse_iso_time(end) == START + (8_000 + 2 * length - 2) * SECOND


def test_no_interval_where_the_process_wanders(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    rng = np.random.default_rng(1)
    values = steady() + np.repeat(0.03 * np.cumsum(rng.normal(size=ROWS // 10)), 10)
    found = tune(capsys, config, recording(tmp_path / "wander.csv", values), *ASKED)
    assert not found["trusted"]
    assert found["trust"].startswith("No: the process wanders")
    assert found["best"] is None
    assert found["groupings"][0]["wander"]["growth"] > 1.5
    for each in found["settings"]:
        assert each["interval"] is each["false_alarms"]["interval"] is each["rank"] is None
        assert "wanders" in each["no_interval"]


def test_settings_without_a_limit_are_told(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    """A few hundred readings have too few peaks to work a limit out from; given ones need none."""
    path = recording(tmp_path / "short.csv", steady()[:1_200])
    found = tune(capsys, config, path, *ASKED, "--kind", "cusum", "--cusum", "0.5,5")
    assert set(by_name(found)) == {"cusum 0.5,5, size 5", "as configured: cusum"}
    assert found["best"] is None
    refused = {each["what"]: each["why"] for each in found["refused"]}
    assert "too few peaks" in refused["cusum, catch 1.5, size 5"]
    assert "too few peaks" in refused["an interval for cusum 0.5,5, size 5; as configured: cusum"]


@pytest.mark.parametrize(
    ("readings", "drift", "why"),
    [
        (200, "1.5", "subgroups for drifts to begin in, and 50 are needed"),
        (1_000, "0.5", "and the best CUSUM takes"),
    ],
)
def test_next_to_nothing_is_told_by_no_figures(
    capsys: pytest.CaptureFixture[str],
    tmp_path: Path,
    config: str,
    readings: int,
    drift: str,
    why: str,
) -> None:
    """The last part of 200 readings holds 8 subgroups of each head; that of 1,000 enough of them,
    but drifts go on for less long than the best CUSUM takes."""
    path = recording(tmp_path / "short.csv", steady()[:readings])
    asked = (config, path, "--catch", drift, "--false-alarm-every", "1d", "--cusum", "0.5,5")
    assert main(["tune", *asked]) == 0
    out = " ".join(capsys.readouterr().out.split())
    assert why in out
    assert "This recording is too short to tell." in out
    if readings == 200:
        assert "nothing can be told" in out
        assert "can be told" not in out.replace("nothing can be told", "")
    found = tune(capsys, *asked)
    assert all(each["delays"] == each["curve"] == [] for each in found["settings"])
    if readings == 200:
        assert {each["keeps"] for each in found["settings"]} == {"not shown"}


def test_why_no_reading_was_found(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    topic = DOCUMENT["characteristics"]["net-weight"]["source"]["topic"]
    path = tmp_path / "other.jsonl"
    lines = [{"time": 1, "topic": "plant/elsewhere", "payload": 1}] * 3
    lines += [{"time": 2, "topic": topic, "payload": {"t": 2, "net": 341}}]
    path.write_text("".join(json.dumps(line) + "\n" for line in lines))
    assert main(["tune", config, str(path), *ASKED]) == 1
    said = capsys.readouterr().err
    assert "no reading of net-weight. Set aside, of 4 messages" in said
    assert [line.split()[:2] for line in said.splitlines()[1::2]] == [
        ["no-topic", "3"],
        ["no-stream", "1"],
    ]


def test_labelled_events_are_scored_and_left_out(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    """Head 1 is 4 g heavy for 20 minutes, once in each part; a crew once heard a false alarm."""
    values = steady()
    for begin in (6_000, 20_000):
        values[begin : begin + 1_200 : 2] += 4.0
    path = recording(tmp_path / "events.csv", values)
    labels = tmp_path / "labels.csv"

    def at(place: int) -> str:
        return format_time(START + place * SECOND)

    labels.write_text(
        "time,until,stream,what\n"
        f"{at(6_000)},{at(7_200)},head=1,cause\n"
        f"{at(20_000)},{at(21_200)},head=1,cause\n"
        f"{at(12_000)},,,false\n"
    )
    asked = (config, path, *ASKED, "--kind", "cusum", "--cusum", "0.5,5")
    plain, labelled = tune(capsys, *asked), tune(capsys, *asked, "--events", str(labels))
    name = "cusum, catch 1.5, size 5"
    seen = by_name(labelled)[name]
    assert seen["events"]["causes"] == seen["events"]["caught"] == 2
    assert 0 < seen["events"]["median_seconds"] <= seen["events"]["late_seconds"] < 240
    assert seen["events"]["false_verdicts"] == seen["events"]["avoided"] == 1
    assert by_name(plain)[name]["events"] is None
    assert seen["false_alarms"]["seen"] == 0
    loose = "cusum 0.5,5, size 5"
    seconds = [by_name(found)[loose]["false_alarms"]["seconds"] for found in (plain, labelled)]
    assert seconds[0] - seconds[1] == pytest.approx(600, abs=30)  # half of the streams' time
    assert (
        by_name(labelled)[loose]["false_alarms"]["seen"]
        < by_name(plain)[loose]["false_alarms"]["seen"] - 10
    )


def test_a_spread_is_watched_where_asked(
    capsys: pytest.CaptureFixture[str], config: str, week: str
) -> None:
    found = tune(capsys, config, week, *ASKED, "--kind", "cusum", "--catch-ratio", "2")
    spread = by_name(found)["cusum, catch_ratio 2, size 5"]
    # 2 ln r · r²/(r² − 1), by the likelihood ratio.
    assert spread["constants"]["k"] == pytest.approx(2 * np.log(2) * 4 / 3, rel=1e-4)
    delay = {each["shape"]: each for each in spread["delays"]}["spread"]
    assert delay["amount"] == 2
    assert delay["readings"]["late"]["value"] < 100
    assert spread["rank"] == 1
    assert found["best_spread"]["name"] == spread["name"]
    assert found["best"]["name"] == "cusum, catch 1.5, size 5"


def test_promise_and_drift_of_the_configuration(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str
) -> None:
    document = copy.deepcopy(DOCUMENT)
    weight = document["characteristics"]["net-weight"]
    weight["source"]["expected_streams"] = 2
    weight["promise"] = {"false_alarm_every": "1d"}
    weight["detectors"] = [{"kind": "cusum", "catch": 1.5}]
    path = tmp_path / "line.yaml"
    path.write_text(yaml.safe_dump(document))
    found = tune(capsys, str(path), week)
    assert found["false_alarm_every"] == 86_400
    assert found["catch"] == [1.5]
    solved = by_name(found)["as configured: cusum"]
    assert solved["interval"]["low"] < 86_400 < (solved["interval"]["high"] or np.inf)


def test_what_is_caught_where_the_baseline_is_still_to_be_learned(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str
) -> None:
    source = {**DOCUMENT["characteristics"]["net-weight"]["source"], "expected_streams": 2}
    intent = {"kind": "cusum", "catch": 1.25, "ignore": 0.25}
    learned = changed(
        tmp_path / "line.yaml",
        source=source,
        baseline={"learn": 1000},
        promise={"false_alarm_every": "1d"},
        detectors=[intent, {"kind": "shewhart", "chart": "range"}],
    )
    fragment = tmp_path / "best.yaml"
    found = tune(capsys, learned, week, "--kind", "cusum", "--to", str(fragment))
    assert (found["catch"], found["ignore"]) == ([1.25], [0.25])
    assert [each.get("chart") for each in keys_of(fragment)["detectors"]] == [None, "range"]


def test_windows(capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str) -> None:
    document = copy.deepcopy(DOCUMENT)
    document["characteristics"]["net-weight"]["subgroup"] = {"window": "20s", "min_size": 3}
    path = tmp_path / "line.yaml"
    path.write_text(yaml.safe_dump(document))
    found = tune(capsys, str(path), week, *ASKED, "--kind", "cusum")
    assert found["groupings"][0]["said"] == "windows of 20s, usually 10 readings"
    assert by_name(found)["cusum, catch 1.5, size 10"]["meets"]


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--catch", "1.5"], "--false-alarm-every is needed, such as 14d: the configuration"),
        (["--false-alarm-every", "1d"], "--catch is needed"),
        ([*ASKED, "--kind", "cusums"], "--kind cusums: write cusum, ewma, shewhart"),
        ([*ASKED, "--size", "0"], "--size: write whole numbers"),
        ([*ASKED, "--cusum", "0.5"], "--cusum 0.5: write K,H"),
        ([*ASKED, "--ewma", "2,3"], "--ewma 2,3: lambda is above 0, up to 1"),
        ([*ASKED, "--ignore", "2"], "--ignore 2, --catch 1.5: ignore drifts from 0 up, and catch"),
        ([*ASKED, "--catch-ratio", "1"], "--catch-ratio: write a number above 1"),
        (["--catch", "much", "--false-alarm-every", "1d"], "--catch much: write a number"),
        (["--catch", "1", "--false-alarm-every", "soon"], "--false-alarm-every: 'soon' is not"),
        (
            [*ASKED, "--characteristic", "torque"],
            "--characteristic torque: the configuration has net-",
        ),
        ([*ASKED, "--jobs", "0"], "--jobs: write a whole number from 1 up"),
        ([*ASKED, "--json", "--to", "-"], "only one of --to -, --html - and --json"),
    ],
)
def test_a_wrong_command_line(
    capsys: pytest.CaptureFixture[str], config: str, week: str, arguments: list[str], said: str
) -> None:
    assert main(["tune", config, week, *arguments]) == 2
    assert said in capsys.readouterr().err


def test_events_of_another_week_are_left_out(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str, week: str
) -> None:
    """They are no causes that a setting missed, nor false alarms that it avoided."""
    path = tmp_path / "labels.csv"
    path.write_text("time,what\n2026-03-01T08:00:00Z,cause\n2026-03-02T07:00:00Z,false\n")
    asked = [config, week, *ASKED, "--kind", "cusum", "--json"]
    assert main(["tune", *asked, "--events", str(path)]) == 0
    out, said = capsys.readouterr()
    events = json.loads(out)["settings"][0]["events"]
    assert (events["causes"], events["false_verdicts"]) == (0, 1)
    assert f"{path}: 1 of 2 events left out: the recording runs from 2026-03-02T06:00:00" in said


def test_what_rings_all_the_time_is_told_no_long_interval(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    """Head 2 is 1 sigma off its configured baseline from the first reading to the last: its sum
    never rests, and none of its peaks begins in the last part."""
    values = steady()
    values[1::2] += 1.9
    path = recording(tmp_path / "off.csv", values)
    found = tune(capsys, config, path, *ASKED, "--kind", "cusum")
    now = by_name(found)["as configured: cusum"]
    seen = now["false_alarms"]
    assert seen["seen"] > 100
    assert (now["keeps"], now["interval"]) == ("no", None)
    assert "it rang far more often" in now["no_interval"]
    (refused,) = [each for each in found["refused"] if "rang far more" in each["why"]]
    assert "whether its baseline still holds" in refused["instead"]


def test_a_kept_detector_that_breaks_the_promise_is_named(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """Heavy tails, t with 4 degrees of freedom: textbook limits of points and of the variance ring
    far too often on them, whatever the promise that they were worked out from."""
    path = recording(
        tmp_path / "heavy.csv",
        341.2 + 1.9 * np.random.default_rng(1).standard_t(4, ROWS) / np.sqrt(2),
    )
    detectors = [
        {"kind": "cusum", "catch": 2},
        {"kind": "shewhart", "chart": "mean"},
        {"kind": "cusum", "chart": "variance", "catch_ratio": 1.5},
    ]
    source = {**DOCUMENT["characteristics"]["net-weight"]["source"], "expected_streams": 2}
    promise = {"false_alarm_every": "1h"}
    config = changed(tmp_path / "line.yaml", source=source, promise=promise, detectors=detectors)
    to = tmp_path / "best.yaml"
    assert main(["tune", config, path, "--to", str(to), "--json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    found = by_name(answer)
    assert answer["breaking"] == ["shewhart-mean", "cusum-variance"]
    assert answer["proposed"]["keeps"] == "no"
    kept = [found[f"as configured: {name}"] for name in ("shewhart-mean", "cusum-variance")]
    assert [each["keeps"] for each in kept] == ["no", "no"]
    # A hundred peaks of such a tail may look exponential; the variance is refused all the same.
    assert found["cusum, catch_ratio 1.5, size 5"]["interval"] is None
    said = " ".join(to.read_text().replace("\n# ", " ").split())
    assert said.startswith("# Caution: shewhart-mean stays, and does not keep its part")
    assert "cusum-variance stays, and does not keep its part of the promise" in said
    assert "With this baseline it would have rung" in said


def test_sources_that_take_turns_in_one_stream_are_refused(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """Six heads in one stream, one of them 1 sigma heavy: baseline refuses them as well."""
    values = steady()
    values[::6] += 1.9
    path = recording(tmp_path / "mixed.csv", values)
    source = dict(DOCUMENT["characteristics"]["net-weight"]["source"])
    del source["stream"]
    config = changed(tmp_path / "line.yaml", source=source)
    assert main(["baseline", config, path]) == 1
    assert "take turns in one stream" in " ".join(capsys.readouterr().out.split())
    to = tmp_path / "best.yaml"
    assert main(["tune", config, path, *ASKED, "--kind", "cusum", "--to", str(to)]) == 1
    out = " ".join(capsys.readouterr().out.split())
    assert "No: 6 sources that differ take turns in one stream" in out
    assert "write its key under source.stream" in out
    assert not to.exists()


def test_a_recording_that_says_nothing(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, config: str
) -> None:
    for values, said in (
        (np.full(4_000, 341.2), "has subgroups that vary in both parts"),
        (steady()[:12], "has subgroups that vary in both parts"),
        (np.full(100, 20.0), "hold no reading of net-weight"),
    ):
        path = recording(tmp_path / "short.csv", values)
        assert main(["tune", config, path, *ASKED]) == 1
        assert said in capsys.readouterr().err


@pytest.mark.parametrize("columns", [80, 120])
def test_nothing_sticks_out_of_the_terminal(
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
    config: str,
    week: str,
    columns: int,
) -> None:
    monkeypatch.setenv("COLUMNS", str(columns))
    asked = [*ASKED, "--size", "5,10", "--catch-ratio", "1.5"]
    assert main(["tune", config, week, *asked]) == 0
    out = capsys.readouterr().out
    told, _ = out.split("\ncharacteristics:\n")
    assert max(map(len, told.splitlines())) <= columns
    assert "now all configured detectors together" in told
    assert "new all of the fragment together" in told
    assert told.count("for the spread, ranked by one 1.5 times as large:") == 2


def test_what_watches_the_spread_today_is_looked_for_too(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, week: str
) -> None:
    """Without ``--catch-ratio``: the ratio is that of the configuration."""
    source = {**DOCUMENT["characteristics"]["net-weight"]["source"], "expected_streams": 2}
    detectors = [
        {"kind": "cusum", "catch": 1.5},
        {"kind": "cusum", "chart": "variance", "catch_ratio": 1.75},
    ]
    promise = {"false_alarm_every": "6h"}
    config = changed(tmp_path / "line.yaml", source=source, promise=promise, detectors=detectors)
    found = tune(capsys, config, week)
    spread = [each for each in found["settings"] if each["chart"] == "variance"]
    names = {"cusum, catch_ratio 1.75, size 5", "as configured: cusum-variance"}
    assert {each["name"] for each in spread} == names
    ranks = [each["rank"] for each in spread if each["rank"] is not None]
    assert ranks == list(range(1, len(ranks) + 1)) != []
    late = [
        delay["readings"]["late"]["value"]
        for each in spread[: len(ranks)]
        for delay in each["delays"]
        if delay["shape"] == "spread"
    ]
    assert late == sorted(late)
    assert {each["asked"] for each in found["settings"] if "shewhart" not in each["name"]} == {
        2 * 6 * 3_600
    }
