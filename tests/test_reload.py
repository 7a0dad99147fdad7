"""SIGHUP through the real daemon: what is read, what is refused, and what the broker is asked."""

from __future__ import annotations

import copy
import signal
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
import yaml
from brokers import Broker, Client, Embedded, Mosquitto
from daemons import ALERTS, CONFIGURATION, ROOT, Launched, launched, started, until, weighing

from monitor.entries import Configured
from monitor.plan import CusumPlan
from monitor.times import SECOND

START = 1_772_433_672 * SECOND
READ = "the configuration was read again"
REFUSED = "the changed configuration is not used"
OLD, NEW = "line-2/scale/{lane}/reading", "line-2/weigher/{lane}/reading"


def edit(daemon: Launched, change: Any) -> None:
    """Change the daemon's own file."""
    document: Any = yaml.safe_load(daemon.configuration.read_text())
    change(document)
    daemon.configuration.write_text(yaml.safe_dump(document, allow_unicode=True))


def hang_up(daemon: Launched) -> None:
    assert daemon.process is not None
    daemon.process.send_signal(signal.SIGHUP)


def moved(document: Any) -> None:
    document["characteristics"]["net-weight"]["source"]["topic"] = NEW


def pair(number: int, net: float, topic: str = "scale") -> list[tuple[str, bytes]]:
    """Two jars, which are a subgroup."""
    sent = [weighing(n, START + n * SECOND, net) for n in (number, number + 1)]
    return [(each.replace("scale", topic), payload) for each, payload in sent]


def configurations(daemon: Launched) -> list[Configured]:
    return [entry for entry in daemon.entries() if isinstance(entry, Configured)]


def test_a_changed_title_goes_on_under_the_same_alert(broker: Broker, tmp_path: Path) -> None:
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as client:
        client.subscribe(ALERTS)
        client.publish_all(pair(1, 346.0))
        client.wait_for(bool)
        edit(daemon, lambda d: d["characteristics"]["net-weight"].update(title="Weight, jar"))
        hang_up(daemon)
        daemon.await_logged(READ)
        client.publish_all(pair(3, 346.0))  # now the CUSUM as well
        one, two = client.wait_for(lambda ms: len(ms) == 2)
        assert daemon.stop() == 0
    assert (one.body["title"], two.body["title"]) == ("Net weight, 340 g jar", "Weight, jar")
    assert one.body["id"] == two.body["id"]
    assert (one.body["sequence"], two.body["sequence"]) == (1, 2)
    assert str(two.body["text"]).startswith("Weight, lane 1 head 1,")
    assert not daemon.logged("not connected"), "the connection stays"


@pytest.mark.parametrize("wrong", ["{", "version: 2\n", "characteristics: {}\n", None])
def test_what_cannot_be_used_is_refused(wrong: str | None, tmp_path: Path) -> None:
    server = Embedded(tmp_path)
    server.start()
    with started(tmp_path / "a", server.port) as daemon, Client(server.port) as client:
        client.subscribe(ALERTS)
        if wrong is None:
            daemon.configuration.unlink()
        else:
            daemon.configuration.write_text(wrong)
        hang_up(daemon)
        line = daemon.await_logged(REFUSED)
        assert line["level"] == "error"
        assert "driftbell.yaml" in line["problems"]
        client.publish_all(pair(1, 350.0))
        client.wait_for(bool)
        assert len(configurations(daemon)) == 1
        assert daemon.stop() == 0
    server.stop()


@pytest.mark.parametrize(
    ("section", "value", "name"),
    [
        ("broker", {"host": "elsewhere", "client_id": "x"}, "broker"),
        ("outputs", {"root": "elsewhere", "points": False}, "root"),
        ("outputs", {"root": ROOT, "points": True}, "points"),
        ("journal", {"path": "another.db"}, "journal"),
        ("journal", {"path": "journal.db", "keep": "1d"}, "retention"),
    ],
)
def test_what_takes_a_restart_is_said(
    section: str, value: object, name: str, tmp_path: Path
) -> None:
    with launched(tmp_path / "a", 1) as daemon:
        daemon.await_logged("started")
        edit(daemon, lambda d: d.update({section: value}))
        hang_up(daemon)
        line = daemon.await_logged(f"{REFUSED}: restart for this")
        assert line["changed"] == name
        assert daemon.stop() == 0


def test_a_changed_topic_is_subscribed_and_the_old_one_given_up(
    broker: Broker, tmp_path: Path
) -> None:
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as client:
        client.subscribe(ALERTS)
        edit(daemon, moved)
        hang_up(daemon)
        daemon.await_logged(READ)
        number, came = 1, ["nothing"]
        while sorted(came) != ["line-2/capper/torque", *["line-2/weigher/1/reading"] * 2]:
            # The broker may take a while to do both.
            before, number = daemon.count(), number + 2
            client.publish_all(pair(number, 350.0, "weigher") + pair(number, 350.0))
            client.publish("line-2/capper/torque", b"2.0")
            until(
                lambda n=before: "line-2/capper/torque" in dict(daemon.journaled()[n:]),  # type: ignore[misc]
                "what was sent last",
                daemon.is_running,
            )
            came = [topic for topic, _ in daemon.journaled()[before:]]
        client.wait_for(bool)
        assert len(configurations(daemon)) == 2
        assert not daemon.logged("not connected")
        assert daemon.stop() == 0


def alerts_of(folder: Path, broker: Broker, *, restart: bool) -> list[dict[str, Any]]:
    """Of one story, with the topic and a detector changed in its middle."""
    root = f"{folder.name}/monitor"
    configuration: Any = copy.deepcopy(CONFIGURATION)
    configuration["outputs"]["root"] = root
    configuration["broker"] = {"client_id": folder.name}
    with started(folder, broker.port, configuration) as daemon, Client(broker.port) as client:
        client.subscribe(f"{root}/alert/#")
        client.publish_all(pair(1, 350.0) + pair(3, 350.0)[:1])
        client.wait_for(bool)
        until(lambda: daemon.count() == 3, "three jars", daemon.is_running)
        edit(daemon, moved)
        if restart:
            assert daemon.stop() == 0
            daemon.start()
        else:
            hang_up(daemon)
            daemon.await_logged(READ)
        client.wait_for(lambda ms: len(ms) == 2)
        number = 5
        while len(client.received(f"{root}/alert/#")) < 3:
            before = daemon.count()
            client.publish_all(pair(number, 350.0, "weigher"))
            client.publish("line-2/capper/torque", b"2.0")
            until(lambda b=before: daemon.count() > b, "some", daemon.is_running)  # type: ignore[misc]
            if daemon.count() - before == 3:
                client.wait_for(lambda ms: len(ms) >= 3)
        found: list[Any] = [m.body for m in client.received(f"{root}/alert/#")]
        assert daemon.stop() == 0
    for body in found:
        del body["published"]
    del found[1]["time"]  # when it was read
    return found[:3]


def test_it_is_the_same_by_a_restart(broker: Broker, tmp_path: Path) -> None:
    one = alerts_of(tmp_path / "signal", broker, restart=False)
    two = alerts_of(tmp_path / "restart", broker, restart=True)
    assert one == two
    assert [(each["event"], each["reason"]) for each in one] == [
        ("raised", None),
        ("withdrawn", "configuration"),
        ("raised", None),
    ]
    assert one[0]["id"] != one[2]["id"]


def test_what_is_kept_of_a_characteristic_goes_with_it(broker: Broker, tmp_path: Path) -> None:
    standings = f"{ROOT}/standing/#"
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as client:
        client.subscribe(f"{ROOT}/#")
        client.publish_all([*pair(1, 350.0), ("line-2/capper/torque", b"2.0")])
        client.wait_for(lambda ms: len({m.topic for m in ms}) == 2, standings)
        edit(daemon, lambda d: d["characteristics"].pop("net-weight"))
        hang_up(daemon)
        cleared = f"{ROOT}/standing/net-weight/1/1"
        client.wait_for(lambda ms: bool(ms) and ms[-1].payload == b"", cleared)
        (_, withdrawn) = client.received(ALERTS)
        assert withdrawn.body["event"] == "withdrawn"
        with Client(broker.port) as late:
            late.subscribe(standings, f"{ROOT}/health")
            late.wait_for(bool, f"{ROOT}/health")
            late.wait_for(bool, standings)
            assert [m.topic for m in late.received(standings)] == [f"{ROOT}/standing/cap-torque"]
        assert daemon.stop() == 0


def test_what_was_configured_once_is_given_up_though_we_never_were_there(
    mosquitto: Callable[..., Mosquitto], tmp_path: Path
) -> None:
    # The embedded broker only gives up filters of the same connection.
    broker = mosquitto()
    with started(tmp_path / "a", broker.port) as daemon:
        assert daemon.stop() == 0
        broker.stop()
        edit(daemon, moved)
        daemon.launch()
        daemon.await_logged("not connected")
        assert daemon.stop() == 0
        broker.start()
        daemon.start()
        with Client(broker.port) as client:
            client.publish_all(pair(1, 350.0))
            client.publish("line-2/capper/torque", b"2.0")
        until(lambda: daemon.count() > 0, "a torque", daemon.is_running)
        assert [topic for topic, _ in daemon.journaled()] == ["line-2/capper/torque"]
        assert daemon.stop() == 0


def promising(catch: float) -> Any:
    def change(document: Any) -> None:
        weight = document["characteristics"]["net-weight"]
        weight["source"]["expected_rate"] = "600/min"
        weight["promise"] = {"false_alarm_every": "14d"}
        weight["detectors"] = [{"kind": "cusum", "catch": catch}]

    return change


def with_an_average(document: Any) -> None:
    promising(60.0)(document)  # more than any single reading hides
    document["characteristics"]["net-weight"]["detectors"][0]["kind"] = "ewma"


def test_an_average_for_an_enormous_drift_stops_no_daemon(broker: Broker, tmp_path: Path) -> None:
    with started(tmp_path / "a", broker.port) as daemon:
        edit(daemon, with_an_average)
        hang_up(daemon)
        until(lambda: len(configurations(daemon)) == 2, "the reload")
        assert daemon.stop() == 0


def sum_limit(daemon: Launched) -> float:
    newest = configurations(daemon)[-1].plan
    (weight,) = [each for each in newest.characteristics if each.name == "net-weight"]
    _, judgement = weight.example()
    assert judgement is not None
    (detector,) = judgement.detectors
    assert isinstance(detector.scheme, CusumPlan)
    return detector.scheme.h


def test_a_promise_is_worked_out_at_a_reload(broker: Broker, tmp_path: Path) -> None:
    """Another catch gives another limit at once; one that cannot be is refused, and the old goes
    on."""
    with started(tmp_path / "a", broker.port) as daemon, Client(broker.port) as client:
        client.subscribe(ALERTS)
        limits = []
        for times, catch in enumerate((6.0, 3.0), start=1):
            edit(daemon, promising(catch))
            hang_up(daemon)
            until(lambda times=times: len(configurations(daemon)) == times + 1, "the reload")
            limits.append(sum_limit(daemon))
        assert limits[0] < limits[1]
        edit(daemon, promising(0.0001))
        hang_up(daemon)
        assert "cannot be told from nothing wrong" in daemon.await_logged(REFUSED)["problems"]
        for number in range(1, 21, 2):
            client.publish_all(pair(number, 346.0))
        (raised,) = client.wait_for(bool)
        assert raised.body["rule"] == "cusum-upper"
        assert sum_limit(daemon) == limits[1]
        assert daemon.stop() == 0
