"""The fixtures themselves: what the brokers keep, lose and say when they end."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from brokers import Broker, Client, Daemon, Mosquitto


def test_delivers_in_order_and_keeps_what_is_retained(broker: Broker) -> None:
    sent = [("a/b", f"{i}".encode()) for i in range(500)]
    with Client(broker.port) as listener, Client(broker.port) as sender:
        listener.subscribe("a/#")
        sender.publish_all(sent)
        sender.publish("kept", b"1", retain=True)
        came = listener.wait_for(lambda ms: len(ms) == len(sent), "a/#")
        assert [(m.topic, m.payload) for m in came] == sent
        listener.subscribe("kept")
        (kept,) = listener.wait_for(bool, "kept")
        assert kept.retained


def test_queues_for_a_session_that_is_away(broker: Broker) -> None:
    with Client(broker.port, "away", clean=False) as away:
        away.subscribe("a")
    with Client(broker.port) as sender:
        sender.publish_all([("a", b"1"), ("a", b"2")])
    with Client(broker.port, "away", clean=False) as back:
        came = back.wait_for(lambda ms: len(ms) == 2)
    assert [m.payload for m in came] == [b"1", b"2"]


def test_carries_a_payload_larger_than_driftbell_reads(broker: Broker) -> None:
    large = b"x" * (300 * 1024)
    with Client(broker.port) as client:
        client.subscribe("a")
        client.publish("a", large)
        (came,) = client.wait_for(bool)
    assert came.payload == large


@pytest.mark.parametrize("end", ["stop", "kill"])
def test_starts_again_on_the_same_port(broker: Broker, end: str) -> None:
    getattr(broker, end)()
    with pytest.raises(ConnectionRefusedError):
        Client(broker.port).connect()
    broker.start()
    with Client(broker.port) as client:
        client.subscribe("a")
        client.publish("a", b"1")
        client.wait_for(bool)


def test_mosquitto_keeps_a_session_over_an_orderly_restart(
    mosquitto: Callable[..., Mosquitto],
) -> None:
    server = mosquitto(max_inflight_messages=1000)
    with Client(server.port, "away", clean=False) as away:
        away.subscribe("a")
    with Client(server.port) as sender:
        sender.publish_all([("a", str(i)) for i in range(2000)])
    server.stop()
    server.start()
    with Client(server.port, "away", clean=False) as back:
        came = back.wait_for(lambda ms: len(ms) == 2000)
    assert [int(m.payload) for m in came] == list(range(2000))


def test_waiting_says_what_had_come(broker: Broker) -> None:
    with Client(broker.port) as client:
        client.subscribe("a")
        client.publish("a", b"not this")
        client.wait_for(bool)
        with pytest.raises(AssertionError, match="not this"):
            client.wait_for(lambda _: False, while_=lambda: False)


def test_a_daemon_that_will_not_start_fails_at_once_with_its_log(
    daemon: Callable[..., Daemon],
) -> None:
    with pytest.raises(AssertionError, match="the daemon's log"):
        daemon({"outputs": {"root": "x"}, "misspelt": 1})
