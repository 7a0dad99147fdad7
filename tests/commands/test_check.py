"""``driftbell check`` as its user runs it."""

from __future__ import annotations

import io
import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from monitor.__main__ import main
from monitor.commands import check as check_command
from monitor.configuration.config import load
from monitor.configuration.resolve import resolve
from monitor.configuration.summary import summary
from monitor.detectors import detector
from monitor.plan import ByCount
from monitor.subgroups import Subgroup

EXAMPLE = Path(__file__).parents[2] / "config" / "jar-line-2.yaml"


def check(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    """Exit status, what went to stdout, what to stderr."""
    status = main(["check", *arguments])
    out, err = capsys.readouterr()
    return status, out, err


def width(out: str, folder: Path) -> int:
    """Of the widest line but those that name a file in ``folder``: paths are never broken."""
    return max(len(line) for line in out.splitlines() if str(folder) not in line)


def test_the_example_in_words(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = check(capsys, str(EXAMPLE))
    assert (status, err) == (0, "")
    assert max(map(len, out.splitlines())) <= 100
    for answer in [
        "jar-line-2.yaml is valid.",
        "localhost:1883, client id jar-line-2-monitor",
        # what is read
        "plant/jar-line-2/checkweigher/+/reading: JSON, value at /net, time at /t, sequence number",
        'used only where /verdict is "accept" or "reject"',
        "set aside as implausible below 0 g or above 1000 g",
        "one for each lane (level 4 of the topic) and head (/head)",
        # 600 a minute, in fives: two subgroups a second
        "every 6 s in each of 12 equally busy streams",
        "given up unfinished where two readings lie more than 30s apart",
        "5 consecutive readings of one stream at most one every 30min: readings between are",
        "at 12 readings a minute one takes 25 s",
        "at 12 readings a minute: one every 5 s",
        # √(0.4² + 1.9²/5) = 0.939
        "standard error of a mean of 5: 0.94 g",
        # three detectors share 14 days: 2Φ(−5.268) = 1.38e-7
        "limits 336.25 to 346.15 g",
        # midway between what is to be caught and what is to be left alone
        "lies more than 0.90 g off the centre is summed up",
        # k of a spread half as large again: 2 ln 1.5 · 2.25 / 1.25 (Hawkins & Olwell 1998)
        "(k 1.46, h",
        # three detectors share 14 days, at two subgroups a second
        "while off by no more than 0.30 g it rings once in 42 days (7,260,000 subgroups)",
        "one false alarm in 14d of all its streams and detectors together: one in 14 days is",
        # twelve streams share two subgroups a second: 85 readings are 17 subgroups of 6 s
        "catches a lasting drift of 1.50 g within 102 s (85 readings) half the time",
        # 2.05 ± 2 · 0.11/√5
        "zone: 2 of the last 3 outside 1.952 to 2.148 N·m (±2 standard errors), on one side",
        "run: 8 in a row on one side of 2.050 N·m: once in 5.3 days (255 subgroups)",
        # 91.75 half hours (Champ & Woodall 1987)
        "with nothing wrong it rings once in 46 h (92 subgroups)",
        # 2.05 ± 2.962 · 0.0492 · √(0.2/1.8), and · 0.2 at first
        "signals outside 2.001 to 2.099 N·m, 2.021 to 2.079 N·m at the first point",
        "on plant/jar-line-2/monitor/alert/net-weight/<head>/<lane>",
        "a rise medium, a fall high, anything without a side high",
        "on a fall: Check fill head {head} for a blocked nozzle.",
        "False alarms within the budget of 2 in 8h: about 0.46 are foreseen with nothing wrong,",
        "about 0.46 in 8 h altogether by the textbook",
    ]:
        assert answer in " ".join(out.split()), answer
    assert "Warning" not in out
    assert out.count("textbook") == 1


def test_the_example_as_json(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = check(capsys, str(EXAMPLE), "--json")
    assert (status, err) == (0, "")
    found = json.loads(out)
    assert found["valid"] is True
    assert found["journal"].endswith("config/var/jar-line-2.db")
    weight, torque, glue = found["characteristics"]
    assert found["warnings"] == []
    assert weight["subgroup"] == {
        "size": 5,
        "max_gap": 30.0,
        "every": None,
        "readings": 5,
        "takes": 0.5,
        "seconds": 0.5,
        "each_stream": False,
    }
    rates = [
        28_800 / each["false_alarm"]["seconds"]
        for characteristic in found["characteristics"]
        for each in characteristic["detectors"]
    ]
    assert found["false_alarms"]["together"] == pytest.approx(sum(rates))
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
    config = load(EXAMPLE, {})
    settings = resolve(config)
    said = {each["name"]: each for each in summary(config, settings)["characteristics"]}
    compared = 0
    for plan in settings.plan.characteristics:
        assert plan.judgement is not None
        assert isinstance(plan.subgroup, ByCount)
        baseline, size = plan.judgement.baseline, plan.subgroup.size
        for each in plan.judgement.detectors:
            running = detector(each, baseline)
            for number in (1, 2):  # a moving range has its first point at the second reading
                values = (baseline.mean,) * size
                identity = (number, None, None, None)
                running.step(Subgroup(number, values, 0, 0, identity, False, size, baseline.mean))
            (shown,) = [d for d in said[plan.name]["detectors"] if d["name"] == each.name]
            for row in running.rows(each.name, ()):
                compared += 1
                if each.kind == "cusum":
                    (limit,) = [
                        sums["limit"]
                        for sums in shown.get("sums", [shown | {"statistic": row.statistic}])
                        if sums["statistic"] == row.statistic
                    ]
                    assert row.upper == pytest.approx(limit)
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
    path = write(tmp_path, "port: 1883", "prot: 1883\n  instances: [a]")
    status, out, err = check(capsys, path)
    assert (status, out) == (2, "")
    assert err.splitlines() == [
        f"{path}:8: broker.prot: is not a known key; did you mean port?",
        f"{path}:9: broker.instances: is not a known key; known here: host, port, client_id, "
        "keepalive, username, password_file, protocol, session_expiry, tls",
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
    assert width(out, tmp_path) <= 100
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
    config = load(EXAMPLE, {})
    plans = resolve(config).plan.characteristics
    said: list[dict[str, Any]] = summary(config, resolve(config))["characteristics"]
    assert [(p.name, [d.name for d in p.example()[1].detectors]) for p in plans] == [
        (each["name"], [d["name"] for d in each["detectors"]]) for each in said
    ]


# ── windows, baselines of their own, and what will bite ──────────────────────────────────────────

WIDE = """\
version: 1
broker: {host: h, protocol: "5", session_expiry: 36h}
outputs: {root: r}
journal: {path: j.db}
characteristics:
  c:
    unit: g
    source: {topic: a, payload: number, expected_rate: 12/min}
    subgroup: {window: 60s, min_size: 3}
    baseline: {mean: 340, sigma: 2}
    detectors:
      - {kind: shewhart, chart: sd, width: 5}
      - {kind: shewhart, chart: median, width: 5}
"""


def said(capsys: pytest.CaptureFixture[str], folder: Path, old: str = "", new: str = "") -> str:
    """What check says of WIDE after an edit, as one line."""
    assert old in WIDE
    path = folder / "wide.yaml"
    path.write_text(WIDE.replace(old, new) if old else WIDE)
    status, out, err = check(capsys, str(path))
    assert (status, err) == (0, "")
    assert width(out, folder) <= 100
    return " ".join(out.split())


def test_windows(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    words = said(capsys, tmp_path)
    for answer in [
        "MQTT 5: it keeps messages for us while we are away, up to 36h",
        "all readings of one stream in each 1min of UTC given up where they are fewer than 3",
        "the limits below are for 12 readings; they move with the number",
        "at 12 readings a minute: about 12 of one stream in each window",
        # c4 of 12 is 0.9776, c5 0.2107 (ISO 7870-2): 2 · 0.9776, and ± 5 · 0.2107 · 2
        "standard deviation of 12, centre 1.96 g, limits 0.00 to 4.06 g",
        "median of 12, centre 340.00 g",
        "with nothing wrong it rings once in",
    ]:
        assert answer in words, answer
    assert "Warning" not in words


def test_windows_without_a_rate(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    words = said(capsys, tmp_path, ", expected_rate: 12/min", "")
    assert "the limits below are for 3 readings" in words
    assert "median of 3" in words
    assert "nobody can say" not in words  # a window is a minute, whatever comes


def test_windows_of_any_number_of_streams(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    words = said(capsys, tmp_path, "topic: a", 'topic: "{a}"')
    assert "in each stream (" in words
    assert "in 8 h in each stream of c by the textbook" in words
    assert "altogether" not in words


def test_a_subgroup_every_so_long_of_many_streams(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = tmp_path / "wide.yaml"
    text = WIDE.replace("{window: 60s, min_size: 3}", "{size: 5, every: 10min}")
    path.write_text(text.replace("topic: a", 'topic: "{a}"'))
    words = " ".join(check(capsys, str(path))[1].split())
    assert "at most one every 10min: readings between are counted, not judged" in words
    assert "at 12 readings a minute one takes N × 25 s where N streams share the readings" in words


def test_one_reading_every_so_long(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = write(tmp_path, "{size: 1, max_gap: 5min}", "{every: 1min, max_gap: 5min}")
    words = " ".join(check(capsys, path)[1].split())
    assert "one reading is judged by itself at most one every 1min" in words


OWN = "by_stream: {a=1: {mean: 339, sigma: 2}, a=2: {mean: 341, sigma: 1.5}}"


def test_baselines_by_stream(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    own = WIDE.replace("topic: a", 'topic: "{a}"')
    path = tmp_path / "wide.yaml"
    path.write_text(own.replace("mean: 340, sigma: 2", f"mean: 340, sigma: 2, {OWN}"))
    words = " ".join(check(capsys, str(path))[1].split())
    assert "2 streams have their own: mean 339 to 341 g, sigma 1.5 to 2 g" in words
    assert "the limits below are those of all other streams" in words
    assert "all other streams: mean 340 g, sigma 2 g" in words
    path.write_text(own.replace("mean: 340, sigma: 2", OWN))
    words = " ".join(check(capsys, str(path))[1].split())
    assert "no other stream is judged; the limits below are those of a=1" in words
    assert "median of 6, centre 339.00 g" in words  # 12 a minute, two streams
    _, out, _ = check(capsys, str(path), "--json")
    (found,) = json.loads(out)["characteristics"]
    assert found["baseline"] is None
    assert list(found["by_stream"]) == ["a=1", "a=2"]
    assert found["by_stream"]["a=2"]["mean"] == 341
    assert found["limits_of"] == "a=1"


def test_where_a_baseline_came_from(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    origin = {
        "recordings": [{"name": "week-9.jsonl.gz", "sha256": "0f" * 32}],
        "first": "2026-02-23T06:00:00Z",
        "counts": {"readings": 604_800, "set_aside": 12},
        "note": "After the overhaul.",
    }
    file = {"version": 1, "characteristic": "c", "mean": 340, "sigma": 2, "origin": origin}
    (tmp_path / "c.json").write_text(json.dumps(file))
    words = said(capsys, tmp_path, "{mean: 340, sigma: 2}", "{file: c.json}")
    assert "mean 340 g, sigma 2 g" in words
    assert (
        "estimated from week-9.jsonl.gz, 604,800 readings, 12 set aside, first "
        "2026-02-23T06:00:00Z its file says: After the overhaul."
    ) in words


def test_warnings(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    words = said(capsys, tmp_path, "width: 5", "width: 2.5")
    assert "wide.yaml is valid, with 2 warnings at the end." in words
    assert words.count("Warning characteristics.c.detectors[") == 2
    assert words.endswith("times in 8 h write a larger width")
    one = said(capsys, tmp_path, "unit: g", "unit: g\n    resolution: 1.5")
    assert "with 1 warning at the end" in one
    assert "Warning characteristics.c.resolution is coarser than half of sigma (2 g)" in one
    _, out, _ = check(capsys, str(tmp_path / "wide.yaml"), "--json")
    (warning,) = json.loads(out)["warnings"]
    assert warning["key"] == "characteristics.c.resolution"
    assert sorted(warning) == ["instead", "key", "wrong"]


def test_without_a_rate_in_subgroups(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    _, out, _ = check(capsys, short(tmp_path))
    words = " ".join(out.split())
    assert "outside: one point outside -3.0 to 3.0 (±3 standard errors): once in 370 subgr" in words
    assert "not counted: c, which has no expected_rate" in words


def test_what_is_too_long_or_never(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = Path(short(tmp_path))
    text = path.read_text().replace("k: 0.5, h: 4, clip: 3", "k: 0, h: 400")
    never = "{kind: shewhart, chart: moving_range, direction: down}"
    path.write_text(text.replace("{kind: shewhart, rules: nelson-1984}", never))
    _, out, _ = check(capsys, str(path))
    words = " ".join(out.split())
    assert "it rings at intervals that are too much to compute" in words
    assert "it never rings" in words
    _, out, _ = check(capsys, str(path), "--json")
    (found,) = json.loads(out)["characteristics"]
    assert [each["false_alarm"]["never"] for each in found["detectors"]] == [False, False, True]
    assert found["detectors"][0]["false_alarm"]["subgroups"] is None


def test_a_terminal_is_told_what_takes_long(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    class Terminal(io.StringIO):
        def isatty(self) -> bool:
            return True

    terminal = Terminal()
    monkeypatch.setattr(check_command, "PATIENCE", 0.0)
    monkeypatch.setattr(sys, "stderr", terminal)
    path = write(tmp_path, "rules: western-electric-1956", "rules: [{rule: trend, length: 7}]")
    assert check(capsys, path)[0] == 0
    assert "working out how often each rule rings" in terminal.getvalue()
    assert terminal.getvalue().endswith("\r\x1b[K")


def test_without_what_the_daemon_needs(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = write(tmp_path)
    text = EXAMPLE.read_text()
    Path(path).write_text("version: 1\n" + text[text.index("characteristics:") :])
    status, _, err = check(capsys, path)
    assert status == 2
    assert [line.split(";")[0] for line in err.splitlines()[:3]] == [
        f"{path}:1: {key}: is missing" for key in ("broker", "journal", "outputs")
    ]
