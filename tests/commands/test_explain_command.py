"""``driftbell explain``: why one alert rang."""

from __future__ import annotations

import json
import sqlite3
from contextlib import closing
from pathlib import Path
from typing import Any

import journals
import pytest
from daemons import driftbell

from monitor.entries import Connected, Message
from monitor.journal import Batch, Journal


@pytest.fixture(scope="module")
def journal(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return journals.write(tmp_path_factory.mktemp("j") / "j.db", journals.day(seed=1), (100,))


def alerts(path: Path) -> list[dict[str, Any]]:
    with closing(sqlite3.connect(path)) as db:
        return [json.loads(event) for (event,) in db.execute("SELECT event FROM alerts")]


def first(path: Path, detector: str) -> dict[str, Any]:
    return next(e for e in alerts(path) if (e["detector"], e["event"]) == (detector, "raised"))


def test_in_words(journal: Path) -> None:
    event = first(journal, "cusum")
    done = driftbell("explain", journal, event["id"])
    text = done.stdout.decode()
    assert (done.returncode, done.stderr) == (0, b"")
    assert text.startswith(event["text"])
    for label in ("Alert", "Life", "Judged by", "Worked out", "It rang", "Began", "To do"):
        assert f"\n{label} " in text
    assert "Isolate and lock out" in text
    assert max(map(len, text.splitlines()[1:])) <= 100


def test_as_json(journal: Path) -> None:
    event = first(journal, "cusum")
    done = driftbell("explain", journal, event["id"][:6].upper(), "--json")
    told = json.loads(done.stdout)
    assert told["id"] == event["id"]
    assert told["events"] == [each for each in alerts(journal) if each["id"] == event["id"]]
    assert (told["source"], told["agrees"], told["carried"]) == ("entries", "exactly", None)
    said = {"value": event["statistic"]["value"], "upper": event["statistic"]["upper"]}
    assert told["rang"].items() >= said.items()
    assert told["rang"]["number"] == event["subgroup"]["number"]
    assert sum(told["rang"]["readings"]) / 3 == pytest.approx(event["subgroup"]["mean"])
    assert told["rang"] in told["steps"]
    baseline = told["judged_by"]["baseline"]
    assert event["baseline"].items() <= baseline.items()
    assert told["judged_by"]["detector"]["h"] == 5.0
    assert told["judged_by"]["subgroup"] == {"size": 3, "max_gap": None, "every": None}


def test_an_alert_of_the_gauge(journal: Path) -> None:
    event = first(journal, "gauge")
    done = driftbell("explain", journal, event["id"])
    assert done.returncode == 0, done.stderr
    assert done.stdout.decode().startswith(event["text"])
    told = json.loads(driftbell("explain", journal, event["id"], "--json").stdout)
    assert (told["rang"], told["steps"]) == (None, [])


@pytest.mark.parametrize(
    ("wanted", "why"),
    [
        ("zzzzzz", "no alert's id begins with 'zzzzzz'; the latest:"),
        ("", "'' is too short: an alert is named by 4 digits of its id or more; the latest:"),
        ("ab", "'ab' is too short"),
        ("0" * 40, "the latest:"),
    ],
)
def test_an_unknown_id_is_answered_with_the_latest(journal: Path, wanted: str, why: str) -> None:
    done = driftbell("explain", journal, wanted)
    said = done.stderr.decode()
    assert (done.returncode, done.stdout) == (1, b"")
    assert why in said
    newest = list(dict.fromkeys(event["id"] for event in reversed(alerts(journal))))
    assert [line.split()[0] for line in said.splitlines()[1:]] == newest[:5]


def test_a_misread_digit_is_answered_with_what_is_similar(journal: Path) -> None:
    known = first(journal, "ewma")["id"]
    wrong = known[:3] + ("0" if known[3] != "0" else "1") + known[4:8]
    done = driftbell("explain", journal, wrong)
    said = done.stderr.decode()
    assert f"no alert's id begins with '{wrong}'; similar ones:" in said
    assert said.splitlines()[1].startswith(f"  {known}  2026-")


def test_a_prefix_of_two_names_both(journal: Path, tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    with closing(sqlite3.connect(journal)) as old, closing(sqlite3.connect(path)) as new:
        old.backup(new)
        new.execute("UPDATE alerts SET id = 'abcd' || substr(id, 5)")
        new.commit()
    done = driftbell("explain", path, "abcd")
    said = done.stderr.decode()
    assert done.returncode == 1
    assert "more than one alert's id begins with abcd; give more of it:" in said
    assert said.splitlines()[1].startswith("  abcd")
    assert len(said.splitlines()) == 7


def test_a_journal_without_alerts(tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    journal = Journal(path)
    journal.commit(Batch([Connected(1, True), Message(2, "a", b"1")]))
    journal.close()
    done = driftbell("explain", path, "abcdef")
    assert done.stderr.decode() == "driftbell explain: the journal holds no alerts\n"
    assert driftbell("explain", tmp_path / "none.db", "abcdef").returncode == 1
