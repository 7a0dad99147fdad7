"""``driftbell check`` as its user runs it."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from monitor.__main__ import main
from monitor.detectors import detector
from monitor.plan import Plan
from monitor.resolve import read_settings
from monitor.subgroups import Subgroup
from monitor.summary import summary

EXAMPLE = Path(__file__).parents[2] / "config" / "jar-line-2.yaml"


def check(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    """Exit status, what went to stdout, what to stderr."""
    status = main(["check", *arguments])
    out, err = capsys.readouterr()
    return status, out, err


def test_the_example_in_words(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = check(capsys, str(EXAMPLE))
    assert (status, err) == (0, "")
    assert max(map(len, out.splitlines())) <= 100
    for answer in [
        "jar-line-2.yaml is valid",
        "localhost:1883, client id jar-line-2-monitor",
        # what is read
        "plant/jar-line-2/checkweigher/+/reading: JSON, value at /net, time at /t, sequence number",
        'used only where /verdict is "accept" or "reject"',
        "set aside as implausible below 0 g or above 1000 g",
        "one for each lane (level 4 of the topic) and head (/head)",
        # 600 a minute, in fives: two subgroups a second
        "every N × 0.5 s in each of N equally busy streams",
        "at 12 readings a minute: one every 25 s",
        "given up unfinished where two readings lie more than 30s apart",
        # √(0.4² + 1.9²/5) = 0.939
        "standard error of a mean of 5: 0.94 g",
        # 341.2 ± 4.5 · 0.939
        "limits 336.97 to 345.43 g",
        # k, h and 2k times 0.939
        "lies more than 0.47 g off the centre is summed up, a sum above 7.51 g signals",
        "quickest for a lasting shift of 0.94 g",
        # d2 1.9 = 4.42; (2.326 + 5 · 0.864) 1.9 = 12.63
        "range of 5, centre 4.42 g, limits 0.00 to 12.63 g",
        # 2.05 ± 2 · 0.11/√5
        "zone: 2 of the last 3 outside 1.952 to 2.148 N·m (±2 standard errors), on one side",
        "run: 8 in a row on one side of 2.050 N·m",
        # 2.05 ± 2.962 · 0.0492 · √(0.2/1.8), and · 0.2 at first
        "signals outside 2.001 to 2.099 N·m, 2.021 to 2.079 N·m at the first point",
        "on plant/jar-line-2/monitor/alert/net-weight/<head>/<lane>",
        "a rise medium, a fall high, anything without a side high",
        "on a fall: Check fill head {head} for a blocked nozzle.",
    ]:
        assert answer in " ".join(out.split()), answer


def test_the_example_as_json(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = check(capsys, str(EXAMPLE), "--json")
    assert (status, err) == (0, "")
    found = json.loads(out)
    assert found["valid"] is True
    assert found["journal"].endswith("config/var/jar-line-2.db")
    weight, torque, glue = found["characteristics"]
    assert weight["subgroup"] == {"size": 5, "max_gap": 30.0, "seconds": 0.5}
    assert weight["source"]["stream"] == {"lane": {"topic_level": 4}, "head": {"value": "/head"}}
    assert weight["baseline"]["standard_error"] == pytest.approx(0.93914, abs=1e-5)
    assert [each["name"] for each in torque["detectors"]] == [
        "shewhart-mean",
        "shewhart-range",
        "slow-cusum",
        "ewma",
    ]
    assert [rule["rule"] for rule in torque["detectors"][0]["rules"]] == [
        "outside",
        "zone",
        "zone",
        "run",
    ]
    assert glue["priority"] == {"up": "low", "down": "low", "other": "low"}


def test_the_limits_are_those_the_engine_uses() -> None:
    """A first subgroup through every detector of the example: what it is held against is what
    check says."""
    settings = read_settings(EXAMPLE, {})
    said = {each["name"]: each for each in summary(settings)["characteristics"]}
    compared = 0
    for plan in settings.plan.characteristics:
        centre, size = plan.baseline.mean, plan.subgroup.size
        for each in plan.detectors:
            running = detector(each, plan.baseline)
            for number in (1, 2):  # a moving range has its first point at the second reading
                values = (centre,) * size
                running.step(
                    Subgroup(number, values, 0, 0, (None, None, None), False, size, centre)
                )
            (shown,) = [d for d in said[plan.name]["detectors"] if d["name"] == each.name]
            for row in running.rows(each.name, ()):
                compared += 1
                if each.kind == "cusum":
                    assert row.upper == pytest.approx(shown["limit"])
                elif each.kind == "ewma":
                    assert shown["first"]["upper"] < row.upper < shown["settled"]["upper"]
                else:
                    limits = (row.centre, row.lower, row.upper)
                    assert limits == (shown["centre"], shown["lower"], shown["upper"])
    assert compared == 11


def write(folder: Path, old: str = "", new: str = "") -> str:
    text = EXAMPLE.read_text()
    assert old in text
    path = folder / "line.yaml"
    path.write_text(text.replace(old, new, 1) if old else text)
    return str(path)


def test_every_problem_to_stderr_a_line_each(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = write(tmp_path, "port: 1883", "prot: 1883\n  tls: {ca: x}")
    status, out, err = check(capsys, path)
    assert (status, out) == (2, "")
    assert err.splitlines() == [
        f"{path}:8: broker.prot: is not a known key; did you mean port?",
        f"{path}:9: broker.tls: is not built yet; leave it out for now",
        "driftbell check: the configuration has 2 problems",
    ]


def test_problems_as_json(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = write(tmp_path, "sigma: 1.9", "sigma: 0")
    status, out, err = check(capsys, path, "--json")
    assert status == 2
    assert err.endswith("driftbell check: the configuration has 1 problem\n")
    (problem,) = json.loads(out)["problems"]
    assert json.loads(out)["valid"] is False
    assert problem["file"] == path
    assert problem["line"] == 1 + EXAMPLE.read_text().partition("sigma: 1.9")[0].count("\n")
    assert problem["key"] == "characteristics.net-weight.baseline.sigma"
    assert problem["wrong"] == "0 is not above 0"
    assert problem["instead"].startswith("write the standard deviation")


def test_no_such_file(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    status, _, err = check(capsys, str(tmp_path / "none.yaml"))
    assert status == 2
    assert "none.yaml: cannot be read (No such file or directory)" in err


SHORT = """\
version: 1
broker: {host: h, username: u, password_file: pw}
outputs: {root: r, points: false}
journal: {path: j.db}
characteristics:
  c:
    source:
      topic: "a/{x}"
      payload: json
      value: ""
      sequence: {value: /n, wraps: 256}
      use_if: {/ok: true}
      plausible: {lower: -3}
    subgroup: SUBGROUP
    baseline: {mean: MEAN, sigma: SIGMA}
    detectors:
      - {kind: cusum, k: 0.5, h: 4, clip: 3, after_signal: hold, direction: up}
      - {kind: ewma, lambda: 1, limits: asymptotic, direction: down}
      - {kind: shewhart, rules: nelson-1984}
"""


def short(folder: Path, mean: str = "0", sigma: str = "1", subgroup: str = "{}") -> str:
    (folder / "pw").write_text("hunter2")
    path = folder / "short.yaml"
    filled = SHORT.replace("MEAN", mean).replace("SIGMA", sigma).replace("SUBGROUP", subgroup)
    path.write_text(filled)
    return str(path)


def test_the_rarer_words(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    status, out, _ = check(capsys, short(tmp_path, subgroup="{max_gap: 5s}"))
    assert status == 0
    words = " ".join(out.split())
    for answer in [
        "client id driftbell-r, user u",
        "under r/, without points",
        "value at the top",
        "sequence number at /n (0 again after 256 numbers)",
        "used only where /ok is true",
        "implausible below -3",
        "every reading is judged by itself",
        "max_gap 5s has nothing to break up",
        "without expected_rate nobody can say how long one takes",
        "(k 0.5, h 4); rises only",
        "no single point counts for more than 3.0 off the centre",
        "after a signal the sum that signalled goes on as it is",
        "signals outside -3.0 to 3.0; falls only",
        "trend: 6 in a row steadily rising or falling",
        "alternation: 14 in a row alternating up and down",
        "stratification: 15 in a row inside -1.0 to 1.0 (±1 standard errors)",
        "mixture: 8 in a row outside -1.0 to 1.0 (±1 standard errors), on either side",
        "priority medium",
        "no reaction is written down",
    ]:
        assert answer in words, answer
    assert "hunter2" not in out


@pytest.mark.parametrize(
    ("rate", "each"), [("5/s", "0.2 s"), ("2/min", "30 s"), ("2/h", "30 min"), ("6/d", "4 h")]
)
def test_how_long_a_subgroup_takes(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, rate: str, each: str
) -> None:
    old = 'value: ""'
    path = Path(short(tmp_path))
    path.write_text(path.read_text().replace(old, f"{old}\n      expected_rate: {rate}"))
    _, out, _ = check(capsys, str(path))
    assert f"every N × {each} in each of N equally busy streams" in " ".join(out.split())


@pytest.mark.parametrize("scale", ["1e-90", "1e-12", "1e-3", "7", "1e6", "1e20", "1e90"])
def test_any_scale_can_be_said(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, scale: str
) -> None:
    path = short(tmp_path, scale, scale, "{size: 4}")
    status, out, _ = check(capsys, path)
    assert status == 0
    assert max(map(len, out.splitlines())) <= 110
    value = float(scale)
    limits = next(line for line in out.splitlines() if "Shewhart chart" in line)
    words = limits.partition("limits ")[2].split()
    assert float(words[0]) == pytest.approx(value - 1.5 * value, rel=0.02)
    assert float(words[2]) == pytest.approx(value + 1.5 * value, rel=0.02)


def test_as_a_process(tmp_path: Path) -> None:
    path = write(tmp_path, "version: 1", "version: 3")
    done: subprocess.CompletedProcess[str] = subprocess.run(
        [sys.executable, "-m", "monitor", "check", path],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert done.stderr.startswith(f"{path}:4: version: 3 is no version")
    assert "Traceback" not in done.stderr


def test_nothing_of_the_plan_is_left_out() -> None:
    """Every characteristic and detector of the plan is in the summary."""
    plan: Plan = read_settings(EXAMPLE, {}).plan
    said: list[dict[str, Any]] = summary(read_settings(EXAMPLE, {}))["characteristics"]
    assert [(each.name, [d.name for d in each.detectors]) for each in plan.characteristics] == [
        (each["name"], [d["name"] for d in each["detectors"]]) for each in said
    ]
