"""``driftbell-replay design`` as its user runs it: figures, words, page, and what it refuses."""

from __future__ import annotations

import json
import os
import pty
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor.configuration.sections.detectors import CusumDetector, EwmaDetector, ShewhartDetector
from replay.__main__ import main


def design(capsys: pytest.CaptureFixture[str], *arguments: str) -> dict[str, Any]:
    assert main(["design", *arguments, "--json"]) == 0
    found: dict[str, Any] = json.loads(capsys.readouterr().out)
    assert list(found) == ["settings", "run_lengths", "floor"]
    return found


def lengths(found: dict[str, Any], which: str = "run_lengths") -> dict[float, float]:
    return {each["shift"]: each["run_length"] for each in found[which]}


@pytest.mark.parametrize(
    ("arguments", "expected"),
    [
        # Two-sided zero-state run lengths, computed elsewhere by integral equations.
        (["--shewhart", "3"], [370.4, 155.2, 43.9, 6.30]),
        (["--cusum", "0.5,4"], [167.7, 26.6, 8.38, 3.34]),
        (["--cusum", "0.5,5"], [465.4, 38.0, 10.38, 4.01]),
        (["--ewma", "0.1,2.814", "--limits", "asymptotic"], [499.6, 31.3, 10.3, 4.36]),
    ],
)
def test_the_textbook_rows(
    capsys: pytest.CaptureFixture[str], arguments: list[str], expected: list[float]
) -> None:
    found = lengths(design(capsys, *arguments, "--shifts", "0,0.5,1,2"))
    assert list(found) == [0, 0.5, 1, 2]
    assert list(found.values()) == pytest.approx(expected, rel=0.004)


def test_rules_and_their_simulation(capsys: pytest.CaptureFixture[str]) -> None:
    exact = design(capsys, "--shewhart", "3", "--rules", "western-electric-1956", "--shifts", "0")
    assert exact["run_lengths"] == [{"shift": 0.0, "run_length": pytest.approx(91.75, abs=0.01)}]
    simulated = design(capsys, "--shewhart", "3", "--rules", "nelson-1984", "--shifts", "1")
    assert simulated["run_lengths"][0]["standard_error"] > 0


def test_a_head_start_and_a_side(capsys: pytest.CaptureFixture[str]) -> None:
    with_start = lengths(design(capsys, "--cusum", "0.5,5", "--head-start", "0.5"))
    assert with_start[1] == pytest.approx(6.35, abs=0.005)  # Lucas & Crosier 1982
    down = design(capsys, "--cusum", "0.5,5", "--direction", "down")
    assert list(lengths(down)) == [-2, -1, -0.5, 0]
    assert lengths(down)[0] == pytest.approx(2 * 465.4, rel=1e-3)
    up = design(capsys, "--cusum", "0.5,5", "--direction", "up", "--shifts", "-1,0,1")
    assert lengths(up, "floor")[-1] is None


@pytest.mark.parametrize("kind", ["cusum", "ewma", "shewhart"])
@pytest.mark.parametrize("ignore", ["0", "0.2"])
def test_the_inverse_holds_the_interval_and_compares_with_the_floor(
    capsys: pytest.CaptureFixture[str], kind: str, ignore: str
) -> None:
    wanted = ["--catch", "1", "--run-length", "1e6", "--ignore", ignore]
    found = design(capsys, *wanted, "--kind", kind)
    own, floor = lengths(found), lengths(found, "floor")
    assert own[float(ignore)] == pytest.approx(1e6, rel=1e-4)
    assert floor[float(ignore)] == pytest.approx(1e6, rel=1e-4)
    if kind == "cusum":
        assert own[1] == pytest.approx(floor[1], rel=0.01)
    if kind == "shewhart":
        assert own[1] > 100 * floor[1]


def test_an_interval_in_time_is_one_in_subgroups(capsys: pytest.CaptureFixture[str]) -> None:
    in_time = design(capsys, "--catch", "1", "--false-alarm-every", "14d", "--rate", "120/min")
    in_number = design(capsys, "--catch", "1", "--run-length", str(14 * 24 * 60 * 120))
    assert in_time == in_number


@pytest.mark.parametrize(
    ("arguments", "model"),
    [
        (["--shewhart", "3", "--rules", "nelson-1984", "--shifts", "2"], ShewhartDetector),
        (["--catch", "1", "--run-length", "1e4"], CusumDetector),
        (["--catch", "1", "--run-length", "1e4", "--kind", "ewma"], EwmaDetector),
    ],
)
def test_settings_are_a_detector_of_the_configuration(
    capsys: pytest.CaptureFixture[str], arguments: list[str], model: Any
) -> None:
    model.model_validate(design(capsys, *arguments)["settings"])
    assert main(["design", *arguments]) == 0
    fragment = capsys.readouterr().out.splitlines()[0]
    model.model_validate(yaml.safe_load(fragment))


def test_the_longest_intervals(capsys: pytest.CaptureFixture[str]) -> None:
    for kind in ("cusum", "ewma", "shewhart"):
        found = design(capsys, "--catch", "1", "--run-length", "1e15", "--kind", kind)
        assert lengths(found)[0] == pytest.approx(1e15, rel=1e-4)


def test_what_is_never_reached_is_null(capsys: pytest.CaptureFixture[str]) -> None:
    found = design(capsys, "--cusum", "2,100", "--direction", "up", "--shifts=-20")
    assert found["run_lengths"] == [{"shift": -20.0, "run_length": None}]
    assert main(["design", "--cusum", "2,100", "--direction", "up", "--shifts=-20"]) == 0
    assert "never" in capsys.readouterr().out


def test_a_terminal_hears_a_sentence_too(tmp_path: Path) -> None:
    leader, follower = pty.openpty()
    command = [sys.executable, "-m", "replay", "design", "--catch", "1", "--run-length", "1e4"]
    command += ["--rate", "2/s"]
    with os.fdopen(leader, "rb", buffering=0) as reader:
        ran = subprocess.run(command, stdout=follower, stderr=subprocess.PIPE, check=True)
        os.close(follower)
        said = b""
        try:
            while piece := reader.read(4096):
                said += piece
        except OSError:  # Linux: the other end is closed
            pass
    assert ran.stderr == b""
    text = " ".join(said.decode().split())
    assert "A CUSUM with k 0.5 and h 8.053 rings once in 10,000 subgroups (1.39 h)" in text
    assert "A shift of 1 standard error is caught after 16.48 subgroups (8.24 s)" in text
    assert "the floor is 16.48." in text


def test_what_nobody_will_see_is_called_so(tmp_path: Path) -> None:
    target = tmp_path / "design.html"

    def said(*more: str) -> str:
        assert main(["design", "--cusum", "0.5,40", "--html", str(target), *more]) == 0
        return target.read_text()

    assert "rings practically never (7.5e+17 subgroups) with nothing wrong" in said()
    text = said("--rate", "2/s")
    assert "rings practically never (over 1,000 years: 7.5e+17 subgroups) with" in text
    assert "<td>over 1,000 years</td>" in text


def test_a_pipe_gets_the_table(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["design", "--cusum", "0.5,5", "--rate", "2/s"]) == 0
    rows = [line.split() for line in capsys.readouterr().out.splitlines()]
    assert ["1", "10.38", "10.38", "5.19", "s", "5.19", "s"] in rows


def test_the_page_needs_nothing_from_outside(tmp_path: Path) -> None:
    target = tmp_path / "design.html"
    assert main(["design", "--catch", "1", "--run-length", "1e4", "--html", str(target)]) == 0
    text = target.read_text()
    assert not re.search(r"https?:|<script|<link|@import|url\(", text)
    curves = re.findall(r'class="curve (\w+)" points="([^"]+)"', text)
    assert [name for name, _ in curves] == ["floor", "own"]
    for _, points in curves:
        heights = [float(pair.split(",")[1]) for pair in points.split()]
        assert heights == sorted(heights), "a larger shift is caught sooner"
        assert len(heights) > 20
    assert "rings once in 10,000 subgroups" in text


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ([], "one of the arguments"),
        (["--cusum", "0.5"], "write K,H"),
        (["--cusum", "0.5,1e9"], "H must be from"),
        (["--ewma", "0,3"], "LAMBDA must be from"),
        (["--shewhart", "wide"], "'wide' is not a number"),
        (["--shewhart", "nan"], "must be from"),
        (["--shewhart", "3", "--cusum", "0.5,5"], "not allowed with"),
        (["--shewhart", "3", "--head-start", "0.5"], "--head-start goes with a CUSUM"),
        (["--cusum", "0.5,5", "--limits", "exact"], "--limits goes with an EWMA"),
        (["--cusum", "0.5,5", "--rules", "nelson-1984"], "--rules goes with --shewhart"),
        (["--cusum", "0.5,5", "--ignore", "0.1"], "--ignore goes with --catch"),
        (["--cusum", "0.5,5", "--shifts", "0,,1"], "--shifts: a number is missing"),
        (["--cusum", "-0.5,4"], "--cusum: K must be from"),
        (["--cusum", "0.5,4", "--rate", "-5/min"], "--rate -5/min: write a number above 0"),
        (["--catch", "1", "--run-length", "1.5"], "must be from 2"),
        (["--cusum", "0.5,5", "--rate", "fast"], "such as 120/min"),
        (["--catch", "1"], "needs one of --run-length and --false-alarm-every"),
        (["--catch", "1", "--false-alarm-every", "14d"], "needs --rate"),
        (["--catch", "1", "--false-alarm-every", "soon", "--rate", "1/s"], "is not a duration"),
        (["--catch", "1", "--run-length", "1e4", "--ignore", "1"], "no smaller than --catch"),
        (["--cusum", "0.5,5", "--json", "--html", "-"], "can have stdout"),
    ],
)
def test_a_wrong_command_line_says_what_to_do(
    capsys: pytest.CaptureFixture[str], arguments: list[str], said: str
) -> None:
    try:
        status = main(["design", *arguments])
    except SystemExit as stop:  # what argparse itself refuses
        status = int(stop.code or 0)
    output = capsys.readouterr()
    assert status == 2
    assert said in output.err
    assert output.out == ""


def test_a_run_length_that_is_too_much_to_compute(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["design", "--ewma", "0.001,20"]) == 1
    said = capsys.readouterr().err
    assert "lambda 0.001 is too small" in said
    assert "write other constants" in said
    asked = ["--catch", "0.5", "--ignore", "0.3", "--run-length", "1e9", "--kind", "ewma"]
    assert main(["design", *asked]) == 1
    assert "catch a larger drift, or ignore less, or take a CUSUM" in capsys.readouterr().err


def test_an_interval_no_detector_has(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["design", "--catch", "1", "--run-length", "2.1", "--direction", "up"]) == 1
    assert "no cusum that is to catch 1" in capsys.readouterr().err
