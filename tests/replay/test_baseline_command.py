"""``driftbell-replay baseline`` as its user runs it: what it writes, says and refuses."""

from __future__ import annotations

import hashlib
import json
import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml
from plans import START
from scipy.signal import lfilter

from monitor.__main__ import main as driftbell
from monitor.configuration.resolve import read_plan
from monitor.times import SECOND, format_time
from replay.__main__ import main

WEIGHT: dict[str, Any] = {
    "title": "Net weight, 340 g jar",
    "unit": "g",
    "source": {
        "topic": "plant/jar-line-2/checkweigher",
        "payload": "json",
        "value": "/net",
        "time": "/t",
        "stream": {"head": "/head"},
        "expected_rate": "10/min",
    },
    "subgroup": {"size": 5},
    "detectors": [
        {"kind": "cusum", "k": 0.5, "h": 12.657},
        {"kind": "shewhart", "chart": "range", "width": 6},
    ],
}
DOCUMENT: dict[str, Any] = {
    "version": 1,
    "broker": {"host": "localhost"},
    "outputs": {"root": "plant/jar-line-2/monitor"},
    "journal": {"path": "line.db"},
    "characteristics": {"net-weight": WEIGHT},
}


class Bench:
    """A folder with a configuration and recordings."""

    def __init__(self, folder: Path) -> None:
        self.config = folder / "line.yaml"
        self.recording = folder / "week-9.csv"
        self.baseline = folder / "baselines" / "net-weight.yaml"
        self.baseline.parent.mkdir()
        self.configure()

    def configure(self, **keys: Any) -> None:
        """Write the configuration with other keys of the characteristic; None removes one."""
        weight = {k: v for k, v in (WEIGHT | keys).items() if v is not None}
        document = DOCUMENT | {"characteristics": {"net-weight": weight}}
        self.config.write_text(yaml.safe_dump(document, sort_keys=False))

    def record(self, heads: dict[str, np.ndarray], every: float = 6) -> None:  # type: ignore[type-arg]
        """A row for each value of each head, heads in turn, ``every`` seconds."""
        rows = ["characteristic,time,value,head"]
        second = 0.0
        for turn in zip(*heads.values(), strict=True):
            for head, value in zip(heads, turn, strict=True):
                moment = format_time(START + round(second * SECOND))
                rows.append(f"net-weight,{moment},{value:.2f},{head}")
                second += every
        self.recording.write_text("\n".join(rows) + "\n")

    def run(self, *options: str) -> int:
        arguments = [str(self.config), str(self.recording), "--to", str(self.baseline), *options]
        return main(["baseline", *arguments])

    def written(self) -> dict[str, Any]:
        document: dict[str, Any] = yaml.safe_load(self.baseline.read_text())
        return document


@pytest.fixture
def bench(tmp_path: Path) -> Bench:
    return Bench(tmp_path)


@pytest.fixture
def chance() -> np.random.Generator:
    return np.random.default_rng(3)


def alike(chance: np.random.Generator, count: int = 6000) -> dict[str, Any]:
    return {"1": chance.normal(341.2, 1.9, count), "2": chance.normal(341.2, 1.9, count)}


def test_the_first_run_writes_what_check_accepts(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance))

    assert bench.run() == 0

    said = capsys.readouterr().out
    assert said.startswith("Trust it")
    assert "baseline: {file: baselines/net-weight.yaml}" in said
    found = bench.written()
    assert found["mean"] == pytest.approx(341.2, abs=0.1)
    assert found["sigma"] == pytest.approx(1.9, rel=0.03)
    assert found["characteristic"] == "net-weight"
    assert found["unit"] == "g"
    origin = found["origin"]
    digest = hashlib.sha256(bench.recording.read_bytes()).hexdigest()
    assert origin["recordings"] == [{"name": "week-9.csv", "sha256": digest}]
    assert origin["counts"] == {
        "readings": 12_000,
        "set_aside": 0,
        "subgroups": 2_400,
        "streams": 2,
    }
    assert origin["note"].startswith("Trusted.")
    bench.configure(baseline={"file": "baselines/net-weight.yaml"})
    assert driftbell(["check", str(bench.config)]) == 0
    (plan,) = read_plan(bench.config, {}).characteristics
    assert plan.judgement is not None
    assert plan.judgement.baseline.sigma == found["sigma"]
    assert main(["play", str(bench.config), str(bench.recording)]) == 0


def test_a_named_file_need_not_exist_yet(bench: Bench, chance: np.random.Generator) -> None:
    bench.record(alike(chance))
    bench.configure(baseline={"file": "baselines/net-weight.yaml"})

    assert bench.run() == 0
    assert driftbell(["check", str(bench.config)]) == 0


def test_heads_that_differ_are_written_one_by_one(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record({"1": chance.normal(341, 1.9, 6000), "2": chance.normal(342, 1.9, 6000)})

    assert bench.run() == 0

    by_stream = bench.written()["by_stream"]
    assert list(by_stream) == ["head=1", "head=2"]
    assert by_stream["head=2"]["mean"] == pytest.approx(342, abs=0.1)
    assert "a baseline for each stream" in capsys.readouterr().out
    bench.configure(baseline={"file": "baselines/net-weight.yaml"})
    assert driftbell(["check", str(bench.config)]) == 0


def test_few_readings_are_provisional_and_say_so_in_the_file(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance, 500))

    assert bench.run() == 0

    said = capsys.readouterr().out
    assert said.startswith("Provisional")
    assert "How much the promise shrinks" in said
    note = bench.written()["origin"]["note"]
    assert note.startswith("Provisional. ")
    assert "200 independent subgroups" in note


def test_a_promise_that_does_not_hold_is_the_headline(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    # Each head's fill follows itself, subgroup after subgroup: an AR(1), its coefficient 0.7.
    heads = {}
    for head in ("1", "2"):
        fill = lfilter([1], [1, -0.7], chance.normal(size=3000)).repeat(5)
        heads[head] = 341.2 + fill + chance.normal(0, 1.9, len(fill))
    bench.record(heads)

    assert bench.run() == 0

    said = " ".join(capsys.readouterr().out.split())
    assert said.startswith("Provisional: centre and spread may be used for now, but not with these")
    headline = said.partition(" - ")[0]
    assert re.search(r"as often as once in [\d.]+ (min|h) with nothing wrong, instead of", headline)
    assert "First let `driftbell-replay tune`" in headline
    assert "But not yet with these detectors" in said
    assert "it may ring as often as once in" in bench.written()["origin"]["note"]


def test_where_nobody_listens_is_said(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    bench.recording = bench.recording.with_suffix(".jsonl")
    topic = "plant/jar-line-2/checkweigher-2"
    line = json.dumps({"time": START / SECOND, "topic": topic, "payload": {"net": 341}})
    bench.recording.write_text(f"{line}\n" * 3)

    assert bench.run() == 1

    said = capsys.readouterr().err
    assert "0 readings were used; set aside 3:" in said
    assert f"week-9.jsonl:1: {topic} " in said
    assert "net-weight listens to plant/jar-line-2/checkweigher\n" in said


def test_a_refused_baseline_is_not_written(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    drifting = np.linspace(0, 4, 6000)
    bench.record({head: values + drifting for head, values in alike(chance).items()})
    bench.baseline.write_text("as it was")

    assert bench.run() == 1

    said = capsys.readouterr().out
    assert said.startswith("Refused")
    assert "the centre does not stay" in said.casefold()
    assert "Nothing is written" in said
    assert "for now" not in said
    assert "promise" not in said
    assert "Nothing was found" not in said
    assert bench.baseline.read_text() == "as it was"


def test_heads_without_streams_of_their_own_are_refused(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    heads = {str(head): chance.normal(341 + 2 * (head == 4), 1.9, 3000) for head in range(1, 7)}
    bench.record(heads)
    bench.configure(source={k: v for k, v in WEIGHT["source"].items() if k != "stream"})

    assert bench.run("--json") == 1

    found = json.loads(capsys.readouterr().out)
    assert found["verdict"] == "refuse"
    assert [r["kind"] for r in found["reasons"] if r["grade"] == "refuse"] == ["mixed"]
    assert found["cycle"]["length"] == 6
    assert found["written"] is None


def test_what_lies_outside_is_listed_and_left_out_only_on_demand(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    heads = alike(chance)
    heads["1"][100:105] += 12
    heads["2"][3000:3005] -= 12
    bench.record(heads)

    def told(*options: str) -> dict[str, Any]:
        assert bench.run("--json", *options) == 0
        found: dict[str, Any] = json.loads(capsys.readouterr().out)
        return found

    kept = told()
    assert [(p["stream"], p["what"]) for p in kept["outside"]] == [
        ("head=1", "mean"),
        ("head=2", "mean"),
    ]
    assert kept["subgroups"] == 2400
    first, second = (point["time"] for point in kept["outside"])
    dropped = told("--leave-out", "outside")
    assert dropped["outside"] == []
    assert dropped["left_out"]["outside"] == 2
    assert [p["time"] for p in dropped["left_out"]["points"]] == [first, second]
    assert dropped["subgroups"] == 2398
    assert bench.written()["origin"]["choices"]["left_out_outside"] == 2
    # A moment belongs to the subgroup of each head that was being gathered then: at the second,
    # the last reading of head 2, head 1 was between two.
    by_time = told("--leave-out", first, "--leave-out", f"{second}/{second}")
    assert by_time["left_out"]["by_time"] == 3
    assert by_time["outside"] == []
    span = told("--leave-out", "2026-03-02T00:00:00Z/2026-03-02T08:00:00Z")
    assert span["left_out"]["by_time"] > 50


def test_everything_is_in_the_object(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance))

    assert bench.run("--json", "--sigma", "range", "--between", "none") == 0

    found = json.loads(capsys.readouterr().out)
    assert found["written"] == str(bench.baseline)
    assert found["baseline"] == {k: found["baseline"][k] for k in ("mean", "sigma")}
    first = found["streams"][0]
    assert first["stream"] == "head=1"
    assert first["sigma"] == first["estimates"]["from_ranges"]
    assert first["estimates"]["moving_range"] is None
    assert found["heads"]["differ"] is False
    assert found["resolution"] == pytest.approx(0.01)
    assert 0 < found["promise"]["unlucky"] < found["promise"]["usual"] <= 1.05
    assert found["promise"]["left_out"] == []
    assert found["wander"]["wanders"] is False


def test_detectors_are_solved_on_what_was_estimated(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance))
    bench.configure(
        source=WEIGHT["source"] | {"expected_streams": 2},
        promise={"false_alarm_every": "14d"},
        detectors=[{"kind": "cusum", "catch": 1.5}],
    )

    assert bench.run("--json") == 0

    # 14 days at ten readings a minute in fives.
    promised = json.loads(capsys.readouterr().out)["promise"]["subgroups"]
    assert promised == pytest.approx(14 * 24 * 60 * 10 / 5, rel=1e-3)


def test_what_check_would_refuse_with_it_is_said(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance))
    bench.configure(detectors=[{"kind": "cusum", "catch": 1.5}])

    assert bench.run() == 2
    assert "promise" in capsys.readouterr().err
    assert not bench.baseline.exists()


def test_messages_on_a_bare_topic(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    chance = np.random.default_rng(3)
    bench.configure(
        source={"topic": "plant/jar-line-2/glue", "payload": "number"}, subgroup=None, unit="°C"
    )
    bench.recording = bench.recording.with_suffix(".jsonl")
    bench.recording.write_text(
        "".join(
            json.dumps(
                {"time": START / SECOND + 30 * i, "topic": "plant/jar-line-2/glue", "payload": v}
            )
            + "\n"
            for i, v in enumerate(chance.normal(165, 1.2, 3000).round(1).tolist())
        )
    )
    bench.configure(
        source={"topic": "plant/jar-line-2/glue", "payload": "number"},
        subgroup=None,
        detectors=[
            {"kind": "shewhart", "width": 4.5},
            {"kind": "shewhart", "chart": "moving_range"},
        ],
    )

    assert bench.run() == 0

    found = bench.written()
    assert found["mean"] == pytest.approx(165, abs=0.1)
    assert found["origin"]["choices"]["sigma"] == "moving-range"
    assert capsys.readouterr().out.startswith("Trust it")


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["--leave-out", "yesterday"], "write a time such as"),
        (["--leave-out", "2026-03-02T08:00:00Z/2026-03-01T08:00:00Z"], "in order"),
        (["--characteristic", "torque"], "the configuration has net-weight"),
        (["--to", "-"], "a file that the configuration can name"),
    ],
)
def test_wrong_options(
    bench: Bench, options: list[str], said: str, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.recording.write_text("characteristic,time,value,head\n")

    assert bench.run(*options) == 2
    assert said in capsys.readouterr().err


def test_of_several_characteristics_one_is_named(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance))
    torque = WEIGHT | {"source": {"topic": "plant/jar-line-2/capper", "payload": "number"}}
    both = {"net-weight": WEIGHT, "cap-torque": torque}
    bench.config.write_text(yaml.safe_dump(DOCUMENT | {"characteristics": both}))

    assert bench.run() == 2
    assert "--characteristic" in capsys.readouterr().err
    assert bench.run("--characteristic", "net-weight") == 0
    assert bench.run("--characteristic", "cap-torque") == 1
    said = capsys.readouterr().err
    assert "no stream of cap-torque" in said
    assert "the recording holds nothing of it" in said


def test_it_does_not_become_a_part_of_the_configuration(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.record(alike(chance))
    folder = bench.config.parent / "conf.d"
    folder.mkdir()
    bench.config = bench.config.rename(folder / "line.yaml")
    arguments = ["baseline", str(folder), str(bench.recording), "--to"]

    assert main([*arguments, str(folder / "b.yaml")]) == 2
    assert "a folder below it" in capsys.readouterr().err
    assert main([*arguments, str(bench.recording)]) == 2
    assert "would replace what is read" in capsys.readouterr().err
    assert main([*arguments, str(bench.baseline)]) == 0


def test_a_wrong_configuration_is_said_before_anything_is_read(
    bench: Bench, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.configure(source={"topic": "#/a", "payload": "json"})
    bench.recording.write_text("characteristic,time,value,head\n")

    assert bench.run() == 2
    assert "source" in capsys.readouterr().err


def test_a_move_near_the_end_and_what_it_says_to_do(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    heads = alike(chance)
    heads["2"][4800:] -= 1.9
    bench.record(heads)

    assert bench.run() == 1

    said = " ".join(capsys.readouterr().out.split())
    assert said.startswith("Refused")
    assert re.search(r"head=2 by -(1.9|2|1.8) g from about 2026-03-02T22:4\d:\d\dZ on", said)
    assert not bench.baseline.exists()
    span = re.search(r"--leave-out (\S+Z/\S+Z)", said)
    assert span is not None
    assert bench.run("--leave-out", span[1]) == 0


def test_a_gauge_that_stood_still(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    heads = alike(chance)
    heads["2"][1000:1200] = heads["2"][1000]
    bench.record(heads)

    assert bench.run("--json") == 1

    found = json.loads(capsys.readouterr().out)
    (still,) = found["stuck"]
    assert (still["stream"], still["readings"], still["runs"]) == ("head=2", 200, 1)
    assert still["first"] == format_time(START + 2001 * 6 * SECOND)
    assert still["last"] == format_time(START + (2001 + 398) * 6 * SECOND)
    (why,) = (each for each in found["reasons"] if each["kind"] == "stuck")
    span = re.search(r"--leave-out (\S+Z/\S+Z)", why["do"])
    assert span is not None
    assert bench.run("--leave-out", span[1]) == 0


def test_a_gauge_that_died_did_not_move(
    bench: Bench, chance: np.random.Generator, capsys: pytest.CaptureFixture[str]
) -> None:
    """For the most part of the recording, at a value of its own: what is left out is that part."""
    heads = alike(chance)
    count = len(heads["2"])
    heads["2"][2 * count // 5 :] = 345.0
    bench.record(heads)

    assert bench.run("--json") == 1

    kinds = {each["kind"] for each in json.loads(capsys.readouterr().out)["reasons"]}
    assert "stuck" in kinds
    assert not {"moved", "wander"} & kinds
