"""The broker as config/ sets it up, from those very files: who may what, and what outlives an
outage."""

from __future__ import annotations

import configparser
import json
import os
import re
import shutil
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import paho.mqtt.client as mqtt
import pytest
import yaml
from brokers import TIMEOUT, mosquitto_path
from daemons import until
from paho.mqtt.enums import CallbackAPIVersion
from pem import needs_openssl

from monitor.commandline import WRONG
from monitor.configuration.resolve import read_plan
from monitor.demo.broker import HOST, await_listening, free_port
from monitor.times import SECOND, format_time

CONFIG = Path(__file__).parents[1] / "config"
EXAMPLE = CONFIG / "jar-line-2.yaml"
MONITOR = "plant/jar-line-2/monitor"
SCALE = "plant/jar-line-2/checkweigher/1/reading"
SHIFT = 8 * 3_600
USERS = ("monitor", "checkweigher", "capper", "labeller", "supervisor", "crew")

needs_mosquitto = pytest.mark.skipif(
    mosquitto_path() is None or shutil.which("mosquitto_passwd") is None,
    reason="mosquitto and mosquitto_passwd are not on PATH",
)


def options() -> dict[str, str]:
    """What mosquitto.conf sets."""
    lines = (CONFIG / "mosquitto.conf").read_text().splitlines()
    return dict(line.split(maxsplit=1) for line in lines if line and not line.startswith("#"))


class Broker:
    """mosquitto with config/mosquitto.conf, its paths and port those of this test."""

    def __init__(self, folder: Path) -> None:
        self.port = free_port()
        self.ca = folder / "etc/certs/ca.pem"
        self.log = folder / "log"
        self._path = folder / "mosquitto.conf"
        self._process: subprocess.Popen[bytes] | None = None
        (folder / "etc/certs").mkdir(parents=True)
        (folder / "store").mkdir()
        text = (CONFIG / "mosquitto.conf").read_text()
        for theirs, ours in (
            ("/etc/mosquitto/", f"{folder}/etc/"),
            ("/var/lib/mosquitto/", f"{folder}/store/"),
            ("listener 8883", f"listener {self.port}"),
            ("log_dest syslog", "log_dest stderr\nuser root"),
        ):
            assert theirs in text
            text = text.replace(theirs, ours)
        self._path.write_text(text)
        shutil.copy(CONFIG / "mosquitto.acl", folder / "etc/driftbell.acl")
        passwords = folder / "etc/driftbell.passwords"
        passwords.write_text("".join(f"{user}:{secret(user)}\n" for user in USERS))
        run("mosquitto_passwd", "-U", str(passwords), cwd=folder)
        certificates(folder / "etc/certs")

    def start(self) -> None:
        path = mosquitto_path()
        assert path is not None
        with self.log.open("ab") as log:
            self._process = subprocess.Popen(
                [path, "-c", str(self._path)], stdin=subprocess.DEVNULL, stdout=log, stderr=log
            )
        assert await_listening(self._process, self.port), self.log.read_text()

    def stop(self) -> None:
        if self._process is not None:
            self._process.terminate()
            self._process.wait(60)
            self._process = None

    def resident(self) -> int:
        """Bytes of memory it holds."""
        assert self._process is not None
        pages = int(Path(f"/proc/{self._process.pid}/statm").read_text().split()[1])
        return pages * os.sysconf("SC_PAGE_SIZE")


def secret(user: str) -> str:
    return f"{user} knows"


def run(*command: str, cwd: Path) -> None:
    subprocess.run(command, cwd=cwd, check=True, capture_output=True)


def certificates(folder: Path) -> None:
    """As the readme says, for a broker on this machine."""
    readme = (CONFIG / "README.md").read_text()
    (block,) = (b for b in re.findall(r"```sh\n(.*?)```", readme, re.DOTALL) if "openssl" in b)
    here = block.replace("DNS:broker.plant.example", f"IP:{HOST}").replace("rsa:3072", "rsa:2048")
    run("sh", "-euc", here, cwd=folder)


@pytest.fixture(scope="module")
def broker(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Broker]:
    made = Broker(tmp_path_factory.mktemp("broker"))
    made.start()
    yield made
    made.stop()


class User:
    """A client over TLS under one of the names; it collects what it receives."""

    def __init__(self, broker: Broker, name: str | None, client_id: str = "") -> None:
        self.received: list[mqtt.MQTTMessage] = []
        self.refused: str | None = None
        self.session_present = False
        self._answered = threading.Event()
        self._granted = threading.Event()
        client = mqtt.Client(
            CallbackAPIVersion.VERSION2, client_id=client_id, clean_session=not client_id
        )
        client.max_inflight_messages_set(1_000)
        if name is not None:
            client.username_pw_set(name, secret(name))
        client.tls_set(str(broker.ca))
        client.on_connect = self._on_connect
        client.on_subscribe = lambda *_: self._granted.set()
        client.on_message = lambda _c, _u, message: self.received.append(message)
        client.connect(HOST, broker.port)
        client.loop_start()
        self._client = client
        assert self._answered.wait(TIMEOUT)

    def _on_connect(
        self, _c: object, _u: object, flags: mqtt.ConnectFlags, reason: Any, _p: object
    ) -> None:
        self.session_present = flags.session_present
        self.refused = str(reason) if reason.is_failure else None
        self._answered.set()

    def subscribe(self, topic: str) -> None:
        self._granted.clear()
        self._client.subscribe(topic, qos=1)
        assert self._granted.wait(TIMEOUT)

    def publish(self, topic: str, *payloads: bytes) -> None:
        """Publish in order, and return once the broker has them all."""
        tokens = [self._client.publish(topic, each, qos=1) for each in payloads]
        deadline = time.monotonic() + TIMEOUT + len(tokens) / 500
        for token in tokens:
            token.wait_for_publish(max(0.0, deadline - time.monotonic()))
            assert token.is_published()

    def has(self, part: bytes) -> bool:
        """Whether a message came that has this in it."""
        return any(part in message.payload for message in self.received)

    def leave(self) -> None:
        self._client.disconnect()
        self._client.loop_stop()


@pytest.fixture
def users(broker: Broker) -> Iterator[Callable[..., User]]:
    """Connects under a name; all leave at the end."""
    made: list[User] = []

    def connect(name: str | None, client_id: str = "") -> User:
        made.append(User(broker, name, client_id))
        return made[-1]

    yield connect
    for each in made:
        each.leave()


@needs_openssl
@needs_mosquitto
@pytest.mark.parametrize("name", [None, "stranger"])
def test_nobody_without_a_known_name(users: Callable[..., User], name: str | None) -> None:
    assert users(name).refused == "Not authorized"


@needs_openssl
@needs_mosquitto
def test_nothing_without_encryption(broker: Broker) -> None:
    plain = mqtt.Client(CallbackAPIVersion.VERSION2)
    plain.username_pw_set("monitor", secret("monitor"))
    plain.connect(HOST, broker.port)
    until(lambda: plain.loop(0.1) == mqtt.MQTT_ERR_CONN_LOST, "the end of a plain connection")
    assert not plain.is_connected()


@needs_openssl
@needs_mosquitto
@pytest.mark.parametrize(
    ("name", "topic", "may"),
    [
        ("monitor", f"{MONITOR}/alert/net-weight/4/1", True),
        ("monitor", f"{MONITOR}/health", True),
        ("monitor", SCALE, False),
        *((name, f"{MONITOR}/alert/net-weight/4/1", False) for name in USERS[1:]),
        *((name, f"{MONITOR}/health", False) for name in USERS[1:]),
        ("supervisor", f"{MONITOR}/command", True),
        *((name, f"{MONITOR}/command", False) for name in (*USERS[1:4], "crew")),
        ("supervisor", f"{MONITOR}/command/result", False),
        ("checkweigher", SCALE, True),
        ("checkweigher", "plant/jar-line-2/capper/torque", False),
        ("capper", "plant/jar-line-2/capper/torque", True),
        ("labeller", "plant/jar-line-2/labeller/glue", True),
        ("labeller", SCALE, False),
    ],
)
def test_who_may_publish_what(users: Callable[..., User], name: str, topic: str, may: bool) -> None:
    readers = [users(each) for each in ("monitor", "crew")]
    for each in readers:
        each.subscribe("plant/#")
    user = users(name)
    assert user.refused is None
    user.publish(topic, b"this")
    # What comes after it shows that it will not come.
    users("labeller").publish("plant/jar-line-2/labeller/glue", b"last")
    users("monitor").publish(f"{MONITOR}/standing/glue", b"last")
    until(lambda: all(each.has(b"last") for each in readers), "what came after")
    came = [(m.topic, m.payload) for each in readers for m in each.received]
    assert ((topic, b"this") in came) is may


@needs_openssl
@needs_mosquitto
@pytest.mark.parametrize(
    "count",
    [3_000, pytest.param(round(SHIFT * 624 / 60), marks=pytest.mark.long)],
    ids=["short", "shift"],
)
def test_what_was_published_while_the_daemon_was_away_waits_for_it(
    broker: Broker, users: Callable[..., User], count: int
) -> None:
    """Through a restart of the broker. At mosquitto's default all but 1,000 would be lost."""
    daemon = users("monitor", "jar-line-2-monitor")
    daemon.subscribe("plant/jar-line-2/checkweigher/+/reading")
    daemon.leave()
    gauge = users("checkweigher")
    sent = [jar(n) for n in range(count)]
    for start in range(0, count, 10_000):
        gauge.publish(SCALE, *sent[start : start + 10_000])
    print(f"{count:,} messages: {broker.resident() / 1e6:,.0f} MB in the broker")
    broker.stop()
    broker.start()
    daemon = users("monitor", "jar-line-2-monitor")
    assert daemon.session_present
    deadline = time.monotonic() + TIMEOUT + count / 1_000
    while len(daemon.received) < count and time.monotonic() < deadline:
        threading.Event().wait(0.05)
    assert [message.payload for message in daemon.received] == sent


def jar(n: int) -> bytes:
    """What the checkweigher sends of one jar."""
    taken = format_time(1_772_433_672 * SECOND + n * SECOND // 10)
    return json.dumps(
        {"t": taken, "n": n, "head": n % 6 + 1, "net": 341.2 + n % 17 / 10, "verdict": "accept"}
    ).encode()


@needs_openssl
@needs_mosquitto
def test_the_daemon_itself_speaks_to_it(
    broker: Broker, users: Callable[..., User], tmp_path: Path
) -> None:
    folder = tmp_path / "daemon"
    folder.mkdir()
    document = yaml.safe_load(EXAMPLE.read_text())
    document["broker"] = {
        "host": HOST,
        "port": broker.port,
        "client_id": "jar-line-2-monitor",
        "username": "monitor",
        "password_file": "password",
        "tls": {"ca": str(broker.ca)},
    }
    (folder / "password").write_text(secret("monitor"))
    (folder / "line.yaml").write_text(yaml.safe_dump(document, allow_unicode=True))
    crew = users("crew")
    crew.subscribe(f"{MONITOR}/#")
    log = folder / "log"
    with log.open("wb") as file:
        process = subprocess.Popen(
            [sys.executable, "-m", "monitor", "run", str(folder / "line.yaml")],
            cwd=CONFIG.parent,
            stderr=file,
        )
    try:
        until(lambda: crew.has(b'"online":true'), "online", lambda: process.poll() is None)
        gauge = users("checkweigher")
        gauge.publish(SCALE, *(drifting(n) for n in range(200)))
        until(lambda: crew.has(b'"event":"raised"'), "an alert", lambda: process.poll() is None)
    finally:
        process.terminate()
        process.wait(TIMEOUT)
    assert secret("monitor") not in log.read_text()


def drifting(n: int) -> bytes:
    """One head, far too heavy."""
    taken = format_time(time.time_ns() // 1_000 // SECOND * SECOND - (300 - n) * SECOND)
    return json.dumps({"t": taken, "n": n, "head": 4, "net": 350.0, "verdict": "accept"}).encode()


def test_it_is_sized_for_a_shift_of_the_example() -> None:
    found, plan = options(), read_plan(EXAMPLE, {})
    rates = [each.source.expected_rate for each in plan.characteristics]
    needed = sum(rate for rate in rates if rate is not None) * SHIFT
    assert None not in rates
    assert f"{needed:,.0f} messages" in (CONFIG / "mosquitto.conf").read_text()
    assert int(found["max_queued_messages"]) >= 1.5 * needed
    assert int(found["max_queued_bytes"]) >= int(found["max_queued_messages"]) * len(jar(999_999))


def test_the_access_list_knows_the_topics_of_the_example() -> None:
    text = (CONFIG / "mosquitto.acl").read_text()
    for topic in read_plan(EXAMPLE, {}).topics():
        assert f"topic read {topic}\n" in text
        assert f"topic write {topic}\n" in text
    root = yaml.safe_load(EXAMPLE.read_text())["outputs"]["root"]
    users = re.findall(r"^user (\S+)\n((?:topic .*\n)*)", text, re.MULTILINE)
    assert [name for name, _ in users] == list(USERS)
    assert [name for name, may in users if f"write {root}/#" in may] == ["monitor"]


def test_the_service_does_not_insist_on_a_wrong_configuration() -> None:
    unit = configparser.ConfigParser(interpolation=None)
    unit.optionxform = str  # type: ignore[assignment, method-assign]
    unit.read(CONFIG / "driftbell.service")
    service = unit["Service"]
    assert service["RestartPreventExitStatus"] == str(WRONG)
    program, command, path = service["ExecStart"].split()
    assert (Path(program).name, command, Path(path).name) == ("driftbell", "run", EXAMPLE.name)


@pytest.mark.skipif(shutil.which("systemd-analyze") is None, reason="systemd is not here")
def test_systemd_understands_the_service() -> None:
    command = ["systemd-analyze", "verify", CONFIG / "driftbell.service"]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    complaints = [line for line in done.stderr.splitlines() if "driftbell.service" in line]
    assert [line for line in complaints if "is not executable" not in line] == []
