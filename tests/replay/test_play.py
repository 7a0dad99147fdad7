"""``driftbell-replay play`` as its user runs it: what it writes, prints and refuses."""

from __future__ import annotations

import csv
import gzip
import json
import os
import pty
import select
import subprocess
import sys
from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from replay.__main__ import main

DOCUMENT: dict[str, Any] = {
    "version": 1,
    "broker": {"host": "localhost"},
    "outputs": {"root": "test/monitor"},
    "journal": {"path": "line.db"},
    "characteristics": {
        "net-weight": {
            "title": "Net weight, 340 g jar",
            "unit": "g",
            "source": {
                "topic": "plant/{lane}/reading",
                "payload": "json",
                "value": "/net",
                "time": "/t",
                "sequence": "/n",
                "stream": {"head": "/head"},
            },
            "baseline": {"mean": 340, "sigma": 1},
            "detectors": [{"kind": "shewhart", "width": 3}, {"kind": "cusum", "k": 0.5, "h": 4}],
        }
    },
}
TORQUE: dict[str, Any] = {
    "source": {"topic": "plant/torque", "payload": "number"},
    "baseline": {"mean": 2, "sigma": 0.1},
    "detectors": [{"kind": "shewhart"}],
}
VALUES = [340.0, 340.5, 345.0, 341.0]


def stamp(second: int) -> str:
    return f"2026-03-02T06:{second // 60:02}:{second % 60:02}.000Z"


def message(second: int, net: object, head: object = 4, **line: object) -> str:
    payload = {"net": net, "t": stamp(second), "n": second, "head": head}
    fields = {"time": stamp(second), "topic": "plant/1/reading", "payload": payload} | line
    return json.dumps(fields) + "\n"


@pytest.fixture
def config(tmp_path: Path) -> str:
    path = tmp_path / "line.yaml"
    path.write_text(json.dumps(DOCUMENT))  # JSON is YAML
    return str(path)


@pytest.fixture
def both(tmp_path: Path) -> str:
    path = tmp_path / "both.yaml"
    characteristics = DOCUMENT["characteristics"] | {"cap-torque": TORQUE}
    path.write_text(json.dumps(DOCUMENT | {"characteristics": characteristics}))
    return str(path)


@pytest.fixture
def write(tmp_path: Path) -> Callable[[str, str], str]:
    def write(name: str, text: str) -> str:
        (tmp_path / name).write_bytes(text.encode())
        return str(tmp_path / name)

    return write


@pytest.fixture
def recording(write: Callable[[str, str], str]) -> str:
    lines = [message(second, net) for second, net in enumerate(VALUES)]
    return write("a.jsonl", "".join(lines))


@pytest.fixture
def table(write: Callable[[str, str], str]) -> str:
    rows = [f"1,4,{second},{stamp(second)},{net}" for second, net in enumerate(VALUES)]
    return write("a.csv", "\n".join(["lane,head,sequence,time,value", *rows]))


Play = Callable[..., tuple[int, str, str]]


@pytest.fixture
def play(capfd: pytest.CaptureFixture[str]) -> Play:
    def play(*arguments: str) -> tuple[int, str, str]:
        try:
            status = main(["play", *arguments])
        except SystemExit as error:  # argparse's own
            status = int(str(error.code))
        return status, *capfd.readouterr()

    return play


def counted(play: Play, *arguments: str) -> dict[str, Any]:
    status, out, _ = play(*arguments, "--json")
    assert status == 0
    counts: dict[str, Any] = json.loads(out)
    return counts


# ── results ──────────────────────────────────────────────────────────────────────────────────────


def test_json_counts(play: Play, config: str, write: Callable[[str, str], str]) -> None:
    # 345 is 5 SE above: outside 3; the upper sum is 0, 0, 4.5 (beyond 4), 0.5.
    path = write(
        "a.jsonl",
        message(0, 340)
        + message(1, 340.5)
        + message(1, 340.5)  # again
        + message(5, 345)  # 2, 3 and 4 are missing
        + message(6, "n/a")
        + "half a li\n"
        + message(7, 341, topic="plant/1/other"),
    )
    counts = counted(play, config, path)
    assert counts.pop("seconds") > 0
    assert counts == {
        "messages": 6,
        "readings": 3,
        "set_aside": {"repeated": 1, "not-a-number": 1, "no-topic": 1},
        "unreadable": 1,
        "subgroups": 3,
        "abandoned": 0,
        "missing": 3,
        "signals": 2,
        "alerts": 1,
        "judged": {"net-weight": {"subgroups": 3, "judged": 3, "why_not": {}, "adopted": {}}},
    }


def learning(write: Callable[[str, str], str], **baseline: object) -> str:
    weight = DOCUMENT["characteristics"]["net-weight"] | {"baseline": baseline}
    weight["source"] = weight["source"] | {"expected_rate": "2/min"}
    return write("learn.yaml", json.dumps(DOCUMENT | {"characteristics": {"net-weight": weight}}))


def test_silence_of_what_nobody_judged_is_no_good_news(
    play: Play, write: Callable[[str, str], str], recording: str
) -> None:
    config = learning(write, learn=1000)

    status, out, _ = play(config, recording)

    assert status == 0
    assert "net-weight: none of 4 subgroups was judged.\n  learning a baseline: 4 of 1000" in out
    assert "No alert could be raised: no subgroup was judged." in out
    told = counted(play, config, recording)["judged"]["net-weight"]
    assert (told["subgroups"], told["judged"]) == (4, 0)
    assert told["why_not"]["head=4;lane=1"].startswith("learning a baseline")


@pytest.mark.parametrize("every", [30, 20])
def test_from_when_on_a_learned_baseline_judges(
    play: Play, write: Callable[[str, str], str], every: int
) -> None:
    # A thousand readings are enough where they reach over the 8 h that are asked for besides.
    config = learning(write, learn=1000, over_at_least="8h", adopt=True)
    values = np.random.default_rng(5).normal(340, 1, 1500)
    start = datetime(2026, 3, 2, tzinfo=UTC)
    moments = [start + timedelta(seconds=every * at) for at in range(len(values))]
    rows = [
        f"1,4,{at},{moment:%Y-%m-%dT%H:%M:%S}Z,{value:.3f}"
        for at, (moment, value) in enumerate(zip(moments, values.tolist(), strict=True))
    ]
    path = write("day.csv", "\n".join(["lane,head,sequence,time,value", *rows]))

    learned = max(1000, 8 * 3600 // every + 1)
    told = counted(play, config, path)["judged"]["net-weight"]

    assert told["judged"] == 1500 - learned
    assert told["why_not"] == {}
    adopted = datetime.fromisoformat(told["adopted"]["head=4;lane=1"])
    assert adopted == moments[learned - 1]
    out = play(config, path)[1]
    assert f"net-weight: {1500 - learned} of 1,500 subgroups were judged." in out
    assert f"adopted for 1 of 1 stream, at {adopted:%Y-%m-%d %H:%M:%S}Z" in out


def test_a_table_gives_the_alerts_that_its_messages_gave(
    play: Play, config: str, recording: str, table: str, tmp_path: Path
) -> None:
    written = []
    for number, path in enumerate((recording, table)):
        alerts = tmp_path / f"{number}.jsonl"
        status, _, err = play(config, path, "--alerts", str(alerts))
        assert (status, err) == (0, "")
        written.append(alerts.read_bytes())
    assert written[0] == written[1]
    [event] = map(json.loads, written[0].splitlines())
    assert (event["event"], event["time"]) == ("raised", stamp(2))
    assert event["stream"] == {"head": "4", "lane": "1"}
    assert "published" not in event
    assert len(event["id"]) == 32


def test_several_recordings_are_one_stream(
    play: Play, config: str, recording: str, write: Callable[[str, str], str], tmp_path: Path
) -> None:
    lines = Path(recording).read_text().splitlines(keepends=True)
    first, second = write("1.jsonl", "".join(lines[:2])), str(tmp_path / "2.jsonl.gz")
    Path(second).write_bytes(gzip.compress("".join(lines[2:]).encode()))
    outputs = []
    for paths in ([recording], [first, second]):
        points = tmp_path / "points.csv"
        assert play(config, *paths, "--points", str(points))[0] == 0
        outputs.append(points.read_bytes())
    assert outputs[0] == outputs[1]
    assert outputs[0].count(b"\n") == 1 + 4 * 3  # a Shewhart row and two sums a subgroup


def test_recordings_of_one_day_are_played_as_the_day_was(
    play: Play, write: Callable[[str, str], str], tmp_path: Path
) -> None:
    # A gauge that sends no time, caught by two clients in turn; only in order are there no gaps.
    torque = TORQUE | {"subgroup": {"size": 5, "max_gap": "1s"}}
    config = write(
        "torque.yaml", json.dumps(DOCUMENT | {"characteristics": {"cap-torque": torque}})
    )
    day = [
        json.dumps({"time": stamp(n), "topic": "plant/torque", "payload": 2 + n / 1000}) + "\n"
        for n in range(100)
    ]
    halves = [write("odd.jsonl", "".join(day[1::2])), write("even.jsonl", "".join(day[::2]))]
    whole = write("whole.jsonl", "".join(day))
    outputs = []
    for paths in ([whole], halves, halves[::-1]):
        points = tmp_path / "points.csv"
        assert play(config, *paths, "--points", str(points))[0] == 0
        outputs.append(points.read_bytes())
    assert outputs[0].count(b"\n") == 1 + 20
    assert outputs[0] == outputs[1] == outputs[2]


def test_no_password_is_needed_to_play(
    play: Play, recording: str, write: Callable[[str, str], str]
) -> None:
    broker = {"host": "localhost", "username": "line", "password_file": "on-the-line-only"}
    config = write("line-2.yaml", json.dumps(DOCUMENT | {"broker": broker}))
    assert counted(play, config, recording)["readings"] == 4


def test_tables_without_times_go_on_where_the_last_one_ended(
    play: Play, write: Callable[[str, str], str], tmp_path: Path
) -> None:
    document = DOCUMENT | {"characteristics": {"cap-torque": TORQUE}}
    config = write("torque.yaml", json.dumps(document))
    tables = [write("1.csv", "value\n2\n2.1\n"), write("2.csv", "value\n2.2\n")]
    points = tmp_path / "points.csv"
    assert play(config, *tables, "--interval", "500ms", "--points", str(points))[0] == 0
    with points.open() as file:
        assert [row["time"] for row in csv.DictReader(file)] == [
            "2000-01-01T00:00:00.000Z",
            "2000-01-01T00:00:00.500Z",
            "2000-01-01T00:00:01.000Z",
        ]


def test_columns_are_renamed(play: Play, config: str, write: Callable[[str, str], str]) -> None:
    path = write("a.csv", f"Date/Time,Net,Lane,Nozzle\n{stamp(0)},340,1,4\n")
    columns = ["time=Date/Time", "value=Net", "lane = Lane", "head=Nozzle"]
    arguments = [word for column in columns for word in ("--column", column)]
    assert counted(play, config, path, *arguments)["subgroups"] == 1


def test_rows_are_judged_as_messages_are(
    play: Play, both: str, write: Callable[[str, str], str]
) -> None:
    rows = [
        "characteristic,lane,head,sequence,time,value",
        f"net-weight,1,4,1,{stamp(1)},340",
        f"net-weight,1,4,1,{stamp(1)},340",
        f"net-weight,1,4,0,{stamp(0)},340",
        f"net-weight,1,,3,{stamp(3)},340",
        f"net-weight,1,4,4,{stamp(4)},",
        f'net-weight,1,4,5,{stamp(5)},"340,5"',
        f"net-weight,1,4,6,{stamp(6)},nan",
        "net-weight,1,4,7,,340",
        "net-weight,1,4,8,2026-03-02 06:00:08,340",
        f"fill-level,,,9,{stamp(9)},1",
        f"cap-torque,,,,{stamp(9)},2",
    ]
    counts = counted(play, both, write("a.csv", "\n".join(rows)))
    assert counts["readings"] == 2
    assert counts["set_aside"] == {
        "repeated": 1,
        "late": 1,
        "no-stream": 1,
        "no-value": 1,
        "not-a-number": 1,
        "not-finite": 1,
        "no-time": 1,
        "bad-time": 1,
        "no-topic": 1,
    }


@pytest.mark.parametrize("option", ["--alerts", "--points"])
def test_a_dash_is_stdout_and_the_summary_makes_way(
    play: Play, config: str, recording: str, tmp_path: Path, option: str
) -> None:
    status, out, err = play(config, recording, option, "-")
    assert status == 0
    assert "Read 4 messages" in err
    play(config, recording, option, str(tmp_path / "out"))
    assert out == (tmp_path / "out").read_text()
    assert len(out.splitlines()) == {"--alerts": 1, "--points": 13}[option]


# ── the summary ──────────────────────────────────────────────────────────────────────────────────


def test_the_summary_answers_what_a_tuner_asks(
    play: Play, config: str, write: Callable[[str, str], str]
) -> None:
    path = write(
        "a.jsonl",
        "".join(message(second, net) for second, net in enumerate(VALUES))
        + message(4, "n/a", head=5)
        + message(90, 340, head=5),
    )
    status, out, err = play(config, path)
    assert (status, err) == (0, "")
    lines = [line.strip() for line in out.splitlines()]
    assert "2026-03-02 06:00:00Z to 2026-03-02 06:01:30Z (1 min 30 s)" in lines[0]
    assert lines[1] == "Used 5 readings; set aside 1:"
    assert lines[2].split(maxsplit=2) == [
        "not-a-number",
        "1",
        "the value is no number (with a decimal point: 341.7)",
    ]
    assert lines[3].startswith(f"first at {path}:5: plant/1/reading '")
    assert '"net":"n/a"' in lines[3]
    rows = [line.split() for line in lines]
    assert ["net-weight", "head=4;lane=1", "4", "1"] in rows
    assert ["net-weight", "head=5;lane=1", "1", "0"] in rows
    assert "Alerts raised: 1, one in 1 min 30 s; 2 signals. They were raised by:" in lines
    assert ["net-weight", "shewhart", "outside-upper", "1"] in rows
    [event] = [line for line in lines if line.startswith("2026-03-02T06:00:02.000Z")]
    assert "raised" in event
    assert "Net weight, lane 1 head 4, has risen" in event


def test_a_characteristic_without_readings_is_pointed_out(
    play: Play, both: str, recording: str
) -> None:
    _, out, _ = play(both, recording)
    assert "No reading of cap-torque was used." in out


def test_many_alerts_are_cut_on_the_terminal_only(
    play: Play, config: str, write: Callable[[str, str], str], tmp_path: Path
) -> None:
    path = write("a.jsonl", "".join(message(n, 350, head=n) for n in range(60)))
    alerts = tmp_path / "alerts.jsonl"
    _, out, _ = play(config, path, "--alerts", str(alerts))
    assert len(alerts.read_text().splitlines()) == 60
    assert out.count("has risen") == 20
    assert "… and 40 more events: --alerts FILE.jsonl keeps them all" in out
    assert "… and 20 more streams" in out


def test_what_a_payload_says_cannot_move_the_cursor(
    play: Play, config: str, write: Callable[[str, str], str]
) -> None:
    path = write("a.jsonl", message(0, 350, head="\x1b[2J4\u202e") + message(1, "\x1b[2J"))
    _, out, _ = play(config, path)
    assert "[2J4" in out
    assert "\x1b" not in out
    assert "\u202e" not in out


def test_messages_out_of_order_are_pointed_out(
    play: Play, config: str, write: Callable[[str, str], str]
) -> None:
    path = write("a.jsonl", message(9, 340) + message(1, 340, head=5) + message(10, 340))
    _, out, _ = play(config, path)
    assert f"1 arrived before one recorded earlier, first at {path}:2: is the recording in" in out
    assert "2026-03-02 06:00:01Z to 2026-03-02 06:00:10Z (9 s)" in out


def test_progress_is_shown_on_a_terminal_and_taken_away(config: str, tmp_path: Path) -> None:
    # The recording is a pipe that is fed until the progress shows, however fast the machine is.
    table = tmp_path / "long.csv"
    os.mkfifo(table)
    leader, follower = pty.openpty()
    process = subprocess.Popen(
        [sys.executable, "-m", "replay", "play", config, str(table), "--json"],
        stdout=subprocess.PIPE,
        stderr=follower,
    )
    os.close(follower)
    rows, shown = 0, b""
    with table.open("wb") as file:
        file.write(b"lane,head,value\n")
        while b"line" not in shown:
            file.write(b"1,4,\n" * 10_000)
            rows += 10_000
            if select.select([leader], [], [], 0)[0]:
                shown += os.read(leader, 4096)
    out, _ = process.communicate()
    assert process.returncode == 0
    assert json.loads(out)["messages"] == rows
    shown += os.read(leader, 4096)
    os.close(leader)
    assert f"\r\x1b[K{table}: line ".encode() in shown
    assert shown.endswith(b"\r\x1b[K")


# ── what goes wrong ──────────────────────────────────────────────────────────────────────────────


def test_lines_that_are_none_are_named_and_the_rest_is_played(
    play: Play, config: str, write: Callable[[str, str], str]
) -> None:
    path = write("a.jsonl", message(0, 340) + "no line\n" * 7 + message(1, 340))
    status, out, err = play(config, path, "--json")
    assert status == 0
    assert json.loads(out)["readings"] == 2
    assert json.loads(out)["unreadable"] == 7
    assert err.splitlines() == [
        *(f"{path}:{number}: not a JSON object" for number in range(2, 7)),
        "… and 2 more lines that could not be read",
    ]


def test_a_file_without_a_single_line_is_a_failure(
    play: Play, config: str, write: Callable[[str, str], str]
) -> None:
    path = write("a.jsonl", '[{"time": 1},\n{"time": 2}]\n')
    status, out, err = play(config, path)
    assert status == 1
    assert "Read 0 messages" in out
    assert f"{path}:1: not a JSON object" in err


def test_a_play_that_fails_leaves_no_results(
    play: Play, config: str, recording: str, write: Callable[[str, str], str], tmp_path: Path
) -> None:
    broken = write("b.jsonl", '{"time":1,"control":"command"}')
    points = tmp_path / "points.csv"
    points.write_text("old")
    status, out, err = play(config, recording, broken, "--points", str(points))
    assert (status, out) == (1, "")
    assert err == f'driftbell-replay play: {broken}:1: control "command" is not built yet\n'
    assert points.read_text() == "old"
    assert not list(tmp_path.glob(".points*"))


@pytest.mark.parametrize(
    ("arguments", "why"),
    [
        (["--json", "--alerts", "-"], "only one of --alerts -, --points - and --json"),
        (["--points", "-", "--alerts", "-"], "only one of --alerts -, --points - and --json"),
        (["--points", "x.csv", "--alerts", "./x.csv"], "--alerts and --points name one file"),
        (["--points", "a.csv"], "a.csv is a recording: write the results elsewhere"),
        (["--column", "value"], '--column value: write it as value="Net weight"'),
        (["--column", "vlaue=Net"], "there is no 'vlaue' to fill; did you mean value?"),
        (
            ["--column", "colour=Net"],
            "use one of characteristic, value, time, sequence, lane",
        ),
        (["--column", "value=a", "--column", "value=b"], "--column value is given twice"),
        (["--column", "value=Net"], "a.csv has no column 'Net': it has 'lane', 'head', 'sequence'"),
        (["--interval", "1 hour"], "--interval: '1 hour' is not a duration"),
        (["--interval", "0s"], "--interval: rows need some time between them"),
        (["--speed", "10"], "unrecognized arguments: --speed 10"),
    ],
)
def test_a_wrong_command_line_is_2_and_says_what_to_write(
    play: Play,
    config: str,
    table: str,
    monkeypatch: pytest.MonkeyPatch,
    tmp_path: Path,
    arguments: list[str],
    why: str,
) -> None:
    monkeypatch.chdir(tmp_path)
    status, out, err = play(config, os.path.basename(table), *arguments)
    assert (status, out) == (2, "")
    assert why in err


def test_a_wrong_configuration_is_2(
    play: Play, recording: str, write: Callable[[str, str], str]
) -> None:
    status, _, err = play(write("wrong.yaml", "version: 1\nbrokr: {}\n"), recording)
    assert status == 2
    assert "wrong.yaml:2: brokr" in err


@pytest.mark.parametrize("name", ["missing.jsonl", "missing.csv", "a.txt"])
def test_a_recording_that_cannot_be_read_is_1(
    play: Play, config: str, tmp_path: Path, name: str
) -> None:
    status, _, err = play(config, str(tmp_path / name))
    assert status == 1
    assert name in err


def test_help_names_every_option() -> None:
    process = subprocess.run(
        [sys.executable, "-m", "replay", "play", "--help"], capture_output=True, text=True
    )
    assert process.returncode == 0
    for option in ("--alerts", "--points", "--json", "--column", "--interval"):
        assert option in process.stdout
