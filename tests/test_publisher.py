"""What is published when, over a link that only takes notes."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import pytest
import yaml
from daemons import CONFIGURATION, ROOT, weighing, with_

from monitor.configuration.resolve import read_settings
from monitor.engine import Engine
from monitor.entries import Configured, Connected, Message, Recorded
from monitor.folding import Folded, fold
from monitor.health import EVERY, Health
from monitor.outbox import Outbox
from monitor.outputs import Gone, Output
from monitor.plan import Plan
from monitor.publisher import Publisher
from monitor.times import SECOND, format_time

START = 1_772_433_672 * SECOND


class Notes:
    """A link that takes what is published, and has it taken when told to."""

    def __init__(self) -> None:
        self.accepted = True
        self.waiting = 0
        self.said: list[tuple[str, dict[str, Any], bool]] = []

    def publish(self, topic: str, payload: bytes, *, retain: bool = False) -> int:
        self.waiting += 1
        body = json.loads(payload) if payload else {}
        self.said.append((topic.removeprefix(f"{ROOT}/"), body, retain))
        return len(self.said)

    def topics(self, first: str) -> list[str]:
        return [topic for topic, *_ in self.said if topic.split("/")[0] == first]


class Bench:
    """A publisher with all that it needs but a broker."""

    def __init__(self, folder: Path) -> None:
        config = folder / "driftbell.yaml"
        broker = {"broker": {"host": "localhost"}}
        points = with_(outputs={"root": ROOT, "points": True})
        config.write_text(yaml.safe_dump(CONFIGURATION | points | broker))
        self.engine = Engine(read_settings(config, {}).plan, points=True)
        self.health = Health()
        self.outbox = Outbox()
        self.publisher = Publisher(ROOT, self.engine, self.health, self.outbox)
        self.link = Notes()
        self.now = START
        self.places = 0

    def connect(self) -> None:
        self.engine.fold(Connected(self.now, True))
        self.health.connected(self.now)

    def fold(self, *entries: Recorded) -> Folded:
        """Fold entries; what must not be lost goes to the outbox, as after a commit."""
        folded = fold(self.engine, self.publisher, entries, ())
        leaving = [(alert.topic, alert.event) for alert in folded.alerts]
        leaving += [(topic, b"") for topic in folded.clears]
        for each in leaving:
            self.places += 1
            self.outbox.extend([(self.places, *each)])
        return folded

    def weigh(self, *nets: float) -> list[Output]:
        """Fold weighings, one a second."""
        outputs: list[Output] = []
        for net in nets:
            self.now += SECOND
            outputs += self.fold(Message(self.now, *weighing(self.now, self.now, net))).outputs
        return outputs

    def publish(self, outputs: Sequence[Output] = ()) -> None:
        self.publisher.publish(self.link, outputs, self.now)


@pytest.fixture
def bench(tmp_path: Path) -> Bench:
    return Bench(tmp_path)


def test_nothing_is_said_before_the_broker_has_agreed(bench: Bench) -> None:
    bench.link.accepted = False
    bench.publish(bench.weigh(340, 340, 350, 350))
    assert not bench.link.said


def test_what_needs_no_subscription_does_not_wait_for_one(bench: Bench) -> None:
    # A broker sends what it kept for us before it answers our SUBSCRIBE.
    bench.publish(bench.weigh(340, 340, 350, 350))
    said = [topic.split("/")[0] for topic, *_ in bench.link.said]
    assert said == ["alert", "point", "point", "standing"]
    bench.connect()
    bench.publish()
    assert bench.link.topics("health") == ["health"]


def test_alerts_carry_when_they_were_published(bench: Bench) -> None:
    entries = [Message(START, *weighing(n, START + n, 350)) for n in (1, 2)]
    folded = bench.fold(*entries)
    ((topic, known, payload, evidence, cause),) = folded.alerts
    assert topic == f"{ROOT}/alert/net-weight/1/1"
    assert "published" not in json.loads(payload)
    assert known == json.loads(payload)["id"]
    shown = json.loads(evidence)
    assert shown["first"] == [START + 1]
    assert shown["z"] == [pytest.approx(10 / (2 / 2**0.5))]
    assert cause == 1, "the second completed the subgroup"
    bench.now += 5 * SECOND
    bench.publish(folded.outputs)
    (alert,) = [body for topic, body, _ in bench.link.said if topic.startswith("alert")]
    assert alert.pop("published") == format_time(bench.now)
    assert alert == json.loads(payload)


def test_only_so_many_alerts_are_under_way(bench: Bench) -> None:
    for place in range(3_000):
        bench.outbox.extend([(place, f"{ROOT}/alert/{place}", b'{"time": "x"}')])
    bench.publish()
    bench.publish()
    assert bench.link.topics("alert") == [f"alert/{n}" for n in range(1_000)]
    bench.outbox.acknowledged(500)
    bench.publish()
    assert bench.link.topics("alert")[1_000:] == ["alert/1000"]


def test_a_broker_that_takes_nothing_gets_alerts_only(bench: Bench) -> None:
    bench.connect()
    bench.publish()
    bench.link.waiting = 60_000
    bench.link.said.clear()
    bench.publish(bench.weigh(340, 340, 350, 350))
    assert [topic.split("/")[0] for topic, *_ in bench.link.said] == ["alert"]
    bench.link.waiting = 0
    bench.now += EVERY
    bench.publish()
    assert bench.link.topics("standing") == ["standing/net-weight/1/1"]
    (health,) = [body for topic, body, _ in bench.link.said if topic == "health"]
    assert health["points_dropped"] == 2


def test_what_is_kept_is_retained_and_nothing_else(bench: Bench) -> None:
    bench.connect()
    bench.publish(bench.weigh(340, 340, 350, 350, 350))
    topic, _ = weighing(1, START, 340.0)
    bench.publish(bench.engine.fold(Message(bench.now, topic, b"{")))
    retained = {topic.split("/")[0]: retain for topic, _, retain in bench.link.said}
    assert retained == {
        "alert": False,
        "point": False,
        "setaside": False,
        "standing": True,
        "health": True,
    }


def test_standings_are_said_on_change_and_else_seldom(bench: Bench) -> None:
    bench.connect()
    for _ in range(30):
        bench.publish(bench.weigh(340, 340))
    assert len(bench.link.topics("standing")) == 60 * SECOND // EVERY
    bench.link.said.clear()
    bench.publish(bench.weigh(350, 350))
    (standing,) = [body for topic, body, _ in bench.link.said if topic.startswith("standing")]
    assert [each["rule"] for each in standing["open"]] == ["outside-upper"]


def test_the_farewell_and_the_will_say_that_nobody_watches(bench: Bench) -> None:
    bench.connect()
    topic, payload = bench.publisher.will(START)
    assert topic == f"{ROOT}/health"
    assert json.loads(payload)["online"] is False
    bench.publisher.farewell(bench.link, bench.now)
    ((topic, body, retain),) = bench.link.said
    assert (topic, body["online"], body["last_error"], retain) == ("health", False, "stopped", True)
    bench.link.accepted = False
    bench.publisher.farewell(bench.link, bench.now)
    assert len(bench.link.said) == 1, "who was never let in says nothing"


def test_what_is_kept_of_a_stream_goes_with_it(bench: Bench) -> None:
    bench.connect()
    bench.publish(bench.weigh(340, 340, 350, 350, 350, 350))  # more to say, but not at once
    bench.link.said.clear()
    folded = bench.fold(Configured(bench.now, Plan(())))
    assert Gone("net-weight", (("head", "1"), ("lane", "1"))) in folded.outputs
    bench.publish(folded.outputs)
    (withdrawn, clear) = bench.link.said
    assert (withdrawn[0], withdrawn[1]["event"]) == ("alert/net-weight/1/1", "withdrawn")
    assert clear == ("standing/net-weight/1/1", {}, True)
    bench.now += 2 * EVERY
    bench.publish()
    assert bench.link.topics("standing") == ["standing/net-weight/1/1"], "it came back"


def test_health_tells_of_lost_sessions(bench: Bench) -> None:
    bench.connect()
    bench.fold(Connected(bench.now, False))
    bench.publish()
    (health,) = [body for topic, body, _ in bench.link.said if topic == "health"]
    assert health["sessions_lost"] == 1
