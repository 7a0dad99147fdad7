"""Labelled events: reading their table, and scoring signals on them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from monitor.commandline import CommandError
from monitor.times import SECOND, parse_iso_time
from replay.readings import StreamReadings
from replay.tuning.labels import Label, read, within
from replay.tuning.running import Running
from replay.tuning.scoring import score

STREAMS = ["head=1;lane=1", "head=2;lane=1"]
AT = parse_iso_time("2026-03-02T06:41:12Z")
MINUTE = 60 * SECOND


def table(folder: Path, text: str) -> str:
    path = folder / "events.csv"
    path.write_text(text)
    return str(path)


def test_what_a_row_means(tmp_path: Path) -> None:
    path = table(
        tmp_path,
        "what,time,until,stream,note\n"
        "cause,2026-03-02T06:41:12Z,,lane=1;head=2,blocked nozzle\n"
        f"cause,{AT // SECOND},2026-03-02T07:41:12+01:00,,\n"
        "false,2026-03-02T06:41:12Z,,,\n",
    )
    assert read(path, STREAMS) == (
        Label("cause", AT, AT + 30 * MINUTE, "head=2;lane=1"),
        Label("cause", AT, AT, None),
        Label("false", AT - 5 * MINUTE, AT + 5 * MINUTE, None),
    )


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        ("time\n", "no column 'what'"),
        ("time,what\n2026-03-02T06:41:12Z,drift\n", "csv:2: what is 'drift': write cause or"),
        ("time,what\n,cause\n", "csv:2: time is empty"),
        ("time,what\nyesterday,cause\n", "'yesterday' is no instant"),
        ("time,what,until\n100,cause,99\n", "until lies before time"),
        ("time,what,stream\n100,cause,head=9;lane=1\n", "no readings of stream head=9;lane=1"),
        ("time,what,stream\n100,cause,nine\n", "stream 'nine' is no stream"),
    ],
)
def test_what_cannot_be_understood(tmp_path: Path, rows: str, said: str) -> None:
    with pytest.raises(CommandError, match=said):
        read(table(tmp_path, rows), STREAMS)


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(CommandError, match="cannot read"):
        read(str(tmp_path / "events.csv"), STREAMS)


def test_what_the_recording_does_not_reach_into_is_left_out() -> None:
    spans = ((-20, -10), (-5, 0), (3, 4), (10, 20), (11, 20))
    found = within([Label("cause", begin, end, None) for begin, end in spans], 0, 10)
    assert [(each.begin, each.end) for each in found] == [(-5, 0), (3, 4), (10, 20)]


def test_scores() -> None:
    time = np.arange(0, 3_600 * SECOND, SECOND)
    running = Running([StreamReadings((), time, time * 0.0, np.empty(0, np.int64))])
    labels = [
        Label("cause", 100 * SECOND, 200 * SECOND, "a"),
        Label("cause", 1_000 * SECOND, 1_100 * SECOND, None),
        Label("cause", 2_000 * SECOND, 2_100 * SECOND, None),
        Label("false", 3_000 * SECOND, 3_100 * SECOND, None),
        Label("false", 150 * SECOND, 160 * SECOND, "b"),
    ]
    signals = [np.array([90, 210, 1_040, 3_050]) * SECOND, np.array([130, 1_020]) * SECOND]
    found = score(labels, ["a", "b"], signals, running)
    assert found is not None
    assert (found.causes, found.caught) == (3, 1)  # a's came too late, and b's was not a's
    assert (found.median_seconds, found.late_seconds) == (20.0, 20.0)
    assert (found.false_verdicts, found.avoided) == (2, 1)
    assert score([], ["a", "b"], signals, running) is None
    none = score(labels[:1], ["a", "b"], [time[:0], time[:0]], running)
    assert none is not None
    assert none.median_seconds is None


def test_running_time_leaves_pauses_out() -> None:
    hour = 3_600 * SECOND
    time = np.concatenate([np.arange(0, 2 * hour, SECOND), np.arange(10 * hour, 11 * hour, SECOND)])
    running = Running([StreamReadings((), time, time * 0.0, np.empty(0, np.int64))])
    assert running.whole == 3 * 3_600 - 2
    instants = np.array([0, hour, 5 * hour, 10 * hour, 10 * hour + SECOND])
    assert running.seconds(instants).tolist() == [0, 3_600, 7_199, 7_199, 7_200]
    assert running.instant(0.5) == pytest.approx(1.5 * hour, abs=SECOND)
    assert running.instant(0.9) == pytest.approx(10.7 * hour, abs=SECOND)
