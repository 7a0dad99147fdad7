"""MQTT 5, and TLS with certificates on both sides: the real daemon on mosquitto."""

from __future__ import annotations

import json
import queue
import shutil
import subprocess
from collections.abc import Callable, Iterator
from pathlib import Path

import paho.mqtt.client as mqtt
import pytest
from brokers import HOST, Client, Daemon, Mosquitto, free_port
from paho.mqtt.enums import CallbackAPIVersion, MQTTProtocolVersion

ROOT = "plant/watch"
READING = "plant/gauge"

pytestmark = pytest.mark.skipif(shutil.which("openssl") is None, reason="openssl is not on PATH")


def openssl(folder: Path, *words: str) -> None:
    subprocess.run(["openssl", *words], cwd=folder, check=True, capture_output=True)


@pytest.fixture(scope="module")
def certificates(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An authority, and a server's and a client's certificate that it signed."""
    folder = tmp_path_factory.mktemp("certificates")
    openssl(
        folder,
        *["req", "-x509", "-newkey", "rsa:2048", "-nodes", "-days", "2", "-subj", "/CN=authority"],
        "-keyout",
        "ca.key",
        "-out",
        "ca.pem",
    )
    (folder / "names").write_text("subjectAltName=DNS:localhost,IP:127.0.0.1\n")
    for name in ("server", "client"):
        openssl(
            folder,
            *f"req -newkey rsa:2048 -nodes -subj /CN={name}".split(),
            "-keyout",
            f"{name}.key",
            "-out",
            f"{name}.csr",
        )
        openssl(
            folder,
            *["x509", "-req", "-days", "2", "-CA", "ca.pem", "-CAkey", "ca.key", "-CAcreateserial"],
            "-extfile",
            "names",
            "-in",
            f"{name}.csr",
            "-out",
            f"{name}.pem",
        )
    return folder


def configuration(**broker: object) -> dict[str, object]:
    return {
        "version": 1,
        "broker": broker,
        "outputs": {"root": ROOT},
        "journal": {"path": "j.db"},
        "characteristics": {
            "weight": {
                "source": {"topic": READING, "payload": "number"},
                "baseline": {"mean": 10, "sigma": 1},
                "detectors": [{"kind": "shewhart"}],
            }
        },
    }


@pytest.fixture
def run(tmp_path: Path) -> Iterator[Callable[..., Daemon]]:
    """Runs the daemon on a mosquitto, which it may reach in another way than we do."""
    made: list[Daemon] = []

    def make(broker: Mosquitto, **options: object) -> Daemon:
        made.append(Daemon(tmp_path, broker.port, configuration(**options)))
        made[-1].start()
        return made[-1]

    yield make
    for each in made:
        if each.process is not None:
            each.stop()


def alert_of(broker: Mosquitto) -> dict[str, object]:
    """The alert that an outlier causes."""
    with Client(broker.port) as client:
        client.subscribe(f"{ROOT}/alert/#")
        client.publish(READING, b"20")
        (alert,) = client.wait_for(lambda ms: len(ms) == 1)
        return alert.body


@pytest.mark.parametrize("protocol", ["3.1.1", "5"])
def test_tls_with_certificates_on_both_sides(
    mosquitto: Callable[..., Mosquitto],
    run: Callable[..., Daemon],
    certificates: Path,
    protocol: str,
) -> None:
    secured = free_port()
    broker = mosquitto(
        **{
            "listener ": f"{secured} {HOST}",
            "cafile": certificates / "ca.pem",
            "certfile": certificates / "server.pem",
            "keyfile": certificates / "server.key",
            "require_certificate": "true",
        }
    )
    shown = {"ca": "ca.pem", "certificate": "client.pem", "key": "client.key"}
    tls = {name: str(certificates / file) for name, file in shown.items()}
    run(broker, host="localhost", port=secured, tls=tls, protocol=protocol)
    assert alert_of(broker)["rule"] == "outside-upper"


def test_a_broker_that_another_authority_vouches_for_is_refused(
    mosquitto: Callable[..., Mosquitto], certificates: Path, tmp_path: Path
) -> None:
    secured = free_port()
    mosquitto(
        **{
            "listener ": f"{secured} {HOST}",
            "certfile": certificates / "server.pem",
            "keyfile": certificates / "server.key",
        }
    )
    openssl(
        tmp_path,
        *["req", "-x509", "-newkey", "rsa:2048", "-nodes", "-days", "2", "-subj", "/CN=stranger"],
        "-keyout",
        "x.key",
        "-out",
        "stranger.pem",
    )
    tls = {"ca": str(tmp_path / "stranger.pem")}
    daemon = Daemon(tmp_path, secured, configuration(host="localhost", port=secured, tls=tls))
    process = subprocess.Popen(
        daemon.command(), stderr=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True
    )
    assert process.stderr is not None
    said = next(line for line in process.stderr if "cannot reach" in line)
    process.terminate()
    process.stderr.read()
    assert process.wait(10) == 0
    assert "CERTIFICATE_VERIFY_FAILED" in said


def test_mqtt_5_describes_its_payloads_and_keeps_its_session(
    mosquitto: Callable[..., Mosquitto], run: Callable[..., Daemon]
) -> None:
    broker = mosquitto()
    came: queue.Queue[mqtt.MQTTMessage] = queue.Queue()
    watcher = mqtt.Client(
        CallbackAPIVersion.VERSION2, protocol=MQTTProtocolVersion.MQTTv5, client_id="watcher"
    )
    subscribed: queue.Queue[bool] = queue.Queue()
    watcher.on_subscribe = lambda *_: subscribed.put(True)
    watcher.on_message = lambda _c, _u, message: came.put(message)
    watcher.connect(HOST, broker.port)
    watcher.loop_start()
    watcher.subscribe(f"{ROOT}/alert/#", 1)
    subscribed.get(timeout=10)
    daemon = run(broker, protocol="5", session_expiry="1h")
    with Client(broker.port) as client:
        client.publish(READING, b"20")
        message = came.get(timeout=10)
        assert message.properties is not None
        assert message.properties.ContentType == "application/json"
        assert message.properties.PayloadFormatIndicator == 1
        assert ("schema", "1") in message.properties.UserProperty
        assert json.loads(message.payload)["schema"] == 1
        # What comes while the daemon is away waits in its session.
        daemon.kill()
        client.publish(READING, b"-20")
    daemon.start()
    rules = iter(lambda: json.loads(came.get(timeout=10).payload)["rule"], None)
    # The first alert may come once more: the daemon was killed before it could note its delivery.
    assert next(rule for rule in rules if rule != "outside-upper") == "outside-lower"
    assert '"session_present": true' in daemon.log.read_text()
    watcher.loop_stop()
