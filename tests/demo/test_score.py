"""Scoring alerts against causes, and the words for it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from monitor.demo import telling
from monitor.demo.scenes import SCENES, Cause
from monitor.demo.score import Finding, score
from monitor.demo.telling import Clock
from monitor.times import SECOND

HEAD, TORQUE = SCENES["demo"].causes
CLOCK = Clock(start=0, seconds=720.0, speed=36.0)


def event(number: int, **fields: Any) -> Any:
    """A raised alert of head 4 upwards at its subgroup ``number``, but for ``fields``."""
    return {
        "event": "raised",
        "characteristic": "net-weight",
        "stream": {"head": "4", "lane": "1"},
        "direction": "up",
        "subgroup": {"number": number, "size": 5},
        "shift": {"estimate": 0.7},
        "text": "Net weight, lane 1 head 4, has risen.",
        "reaction": ["Check fill head 4."],
    } | fields


def test_counts_from_the_onset_to_the_alert_in_readings_of_the_stream() -> None:
    # Onset 240 s is after 400 readings of a head, one each 0.6 s; subgroup 120 ends at reading 600.
    alert = event(120)
    assert score([HEAD], [alert]) == (
        # 120 s of a growth of 240 s to 2 g: half of it is there, a quarter on average.
        [Finding(HEAD, alert, seconds=120.0, readings=200, size=0.5, said=0.7)],
        [],
    )


def test_a_gauge_without_time_is_counted_alike() -> None:
    alert = event(
        90, characteristic="cap-torque", stream={}, direction="down", shift=None
    )  # 450 readings, one a second; the onset is at 360 s
    (finding,), false = score([TORQUE], [alert])
    assert (finding.seconds, finding.readings, finding.said) == (90.0, 90, None)
    assert false == []


def test_the_first_alert_counts_and_a_later_one_of_the_same_cause_is_not_false() -> None:
    first, second = event(120), event(200)
    (finding,), false = score([HEAD], [first, second])
    assert finding.alert is first
    assert false == []


@pytest.mark.parametrize(
    "alert",
    [
        event(80),  # ends at the very onset
        event(120, direction="down"),
        event(120, stream={"head": "3", "lane": "1"}),
        event(120, characteristic="cap-torque", stream={}),
    ],
    ids=["too early", "other direction", "other head", "other gauge"],
)
def test_an_alert_that_is_no_cause_s_is_false_and_the_cause_is_missed(alert: Any) -> None:
    assert score([HEAD], [alert]) == ([Finding(HEAD)], [alert])


def test_a_cause_of_all_heads_is_found_on_any() -> None:
    (cause,) = SCENES["all-heads-step"].causes
    (finding,), _ = score([cause], [event(220, direction="down")])
    assert finding.seconds == 60.0
    assert finding.size == -1.5


def test_a_spread_is_found_by_an_alert_without_a_side() -> None:
    (cause,) = SCENES["spread-growth"].causes
    alert = event(220, direction=None, stream={"head": "2", "lane": "1"})
    (finding,), _ = score([cause], [alert])
    assert finding.alert is alert


def test_growth_and_its_average() -> None:
    ramp = Cause("", "net-weight", "shift", 100.0, 50.0, 1.0)
    assert [ramp.grown(t) for t in (99.9, 100.0, 125.0, 150.0, 999.0)] == [0, 0, 0.5, 1, 1]
    steps = [100 + 0.01 * i for i in range(1, 20_001)]
    for until in (130.0, 150.0, 300.0):
        upto = [ramp.grown(t) for t in steps if t <= until]
        assert ramp.average(until) == pytest.approx(sum(upto) / len(upto), abs=1e-3)


def test_a_gauge_without_time_is_told_at_the_line_s_time_all_the_same() -> None:
    # 10 s by this computer's clock after it began, the line is 360 s on.
    clock = Clock(start=0, seconds=720.0, speed=36.0, begun=1_000 * SECOND)
    shift = {"estimate": -0.08, "onset": "1970-01-01T00:16:50.000Z"}
    text = "Capping torque has fallen since about 00:16:50 UTC."
    undated = event(90, characteristic="cap-torque", text=text, shift=shift, reaction=[])
    assert telling.alert(undated, clock) == (
        "00:07:30  Capping torque has fallen since about 00:06:00 UTC."
    )
    dated = event(90, text=text, shift=shift, reaction=[])
    assert telling.alert(dated, clock).endswith(text)


def test_an_alert_is_told_with_the_line_s_time_and_what_to_do() -> None:
    told = telling.alert(event(120), CLOCK)
    assert told == ("00:06:00  Net weight, lane 1 head 4, has risen.\n          Check fill head 4.")


def test_the_closing_tells_found_missed_and_false() -> None:
    false_alert = event(10, text="Net weight, lane 1 head 4, has fallen.", direction="down")
    findings, false = score([HEAD, TORQUE], [event(120), false_alert])
    counts: Any = {"messages": 8, "set_aside": {"repeated": 2}}
    told = telling.closing(findings, false, CLOCK, None, 8, counts)
    rows = {tuple(row.split("  ")[1:2]): " ".join(row.split()) for row in told.splitlines()}
    assert rows[("fill head 4 drifts up",)] == (
        "fill head 4 drifts up 00:04:00 120 s, 200 readings +0.5 g +0.7 g"
    )
    assert rows[("capping torque loosens",)] == "capping torque loosens 00:06:00 NOT FOUND"
    assert "False alarms: 00:00:30 Net weight, lane 1 head 4, has fallen." in told
    assert "Messages: 8 sent, 8 read; set aside: 2 repeated." in told


def test_the_closing_says_so_when_nothing_was_false_or_set_aside() -> None:
    counts: Any = {"messages": 8, "set_aside": {}}
    told = telling.closing([], [], CLOCK, None, 8, counts)
    assert "False alarms: none." in told
    assert "set aside: none." in told


def test_what_is_not_found_when_it_is_stopped_early_is_not_missed() -> None:
    told = telling.closing([Finding(HEAD)], [], CLOCK, 300.0, 8, None)
    assert "not yet" in told
    assert "NOT FOUND" not in told
    assert "Stopped early, 300 s into the line's 720 s." in told


def test_commands_to_try_are_called_as_this_one_was(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    script = tmp_path / "driftbell"
    script.write_text("#!/bin/sh\n")
    script.chmod(0o755)
    (tmp_path / "driftbell-replay").symlink_to(script)
    monkeypatch.setattr("sys.argv", [str(script)])
    monkeypatch.setenv("PATH", "/nowhere")
    assert telling.program("driftbell-replay", "replay") == str(tmp_path / "driftbell-replay")
    monkeypatch.setenv("PATH", str(tmp_path))
    assert telling.program("driftbell-replay", "replay") == "driftbell-replay"
    monkeypatch.setattr("sys.argv", [str(tmp_path / "__main__.py")])
    assert telling.program("driftbell", "monitor").endswith(" -m monitor")
