"""One connection: against real brokers, and against what no broker should send."""

from __future__ import annotations

import contextlib
import select
import socket
import struct
import time
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from itertools import pairwise

import pytest
from brokers import TIMEOUT, Broker, Client, Mosquitto
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor import mqtt
from monitor.demo.broker import HOST
from monitor.mqtt import Link
from monitor.plan import BrokerPlan

WILL = ("will", b"gone")
CONNACK = b"\x20\x02\x00\x00"
SUBACK = b"\x90\x03\x00\x01\x01"


@dataclass
class Heard:
    """What a link told its receiver."""

    messages: list[tuple[str, bytes, bool, int, int]] = field(default_factory=list)
    again: list[bool] = field(default_factory=list)
    sessions: list[bool] = field(default_factory=list)
    packets: list[int] = field(default_factory=list)

    def message(
        self, topic: str, payload: bytes, retain: bool, qos: int, packet: int, dup: bool
    ) -> None:
        self.messages.append((topic, payload, retain, qos, packet))
        self.again.append(dup)

    def subscribed(self, session_present: bool) -> None:
        self.sessions.append(session_present)

    def taken(self, packet: int) -> None:
        self.packets.append(packet)

    def payloads(self) -> list[bytes]:
        return [payload for _, payload, *_ in self.messages]


def plan(port: int, keepalive: int = 60) -> BrokerPlan:
    return BrokerPlan(HOST, port, "link", keepalive)


def link_to(port: int, heard: Heard, *filters: str, stale: Iterable[str] = ()) -> Link:
    connection = socket.create_connection((HOST, port))
    return Link(connection, plan(port), filters or ["in/#"], stale, WILL, heard)


def pump(link: Link, condition: Callable[[], object], full: Callable[[], bool] = bool) -> None:
    """Turn the link's loop until the condition holds."""
    deadline = time.monotonic() + TIMEOUT
    more = True
    while not condition():
        assert time.monotonic() < deadline, "what the test waits for did not come"
        link.write()
        if link.lost is None:
            timeout = 0.0 if more else 0.1
            select.select([link], [link] if link.wants_write else [], [], timeout)
            more = link.read(full)


@contextlib.contextmanager
def subscribed(port: int, heard: Heard) -> Iterator[Link]:
    """A link that gets what is published under in/."""
    link = link_to(port, heard)
    pump(link, lambda: heard.sessions)
    yield link
    link.drop()


def test_what_was_not_acknowledged_comes_again(broker: Broker, client: Client) -> None:
    first, second, third = Heard(), Heard(), Heard()
    sent = [str(n).encode() for n in range(50)]
    with subscribed(broker.port, first) as link:
        client.publish_all([("in/a", payload) for payload in sent])
        pump(link, lambda: len(first.messages) >= 20)
        link.acknowledge([packet for *_, packet in first.messages[:5]])
        link.close(0.0)
    with subscribed(broker.port, second) as link:
        acknowledged = 0

        def everything() -> bool:
            nonlocal acknowledged
            link.acknowledge([packet for *_, packet in second.messages[acknowledged:]])
            acknowledged = len(second.messages)
            return second.payloads()[-1:] == sent[-1:]

        pump(link, everything)
        pump(link, lambda: not link.wants_write)
        client.publish("in/a", b"last")
        pump(link, lambda: second.payloads()[-1] == b"last")
    assert second.payloads() == [*sent[5:], b"last"]
    assert (first.sessions, second.sessions) == ([False], [True])
    with subscribed(broker.port, third) as link:
        pump(link, third.payloads)
    assert third.payloads() == [b"last"]
    assert not any(first.again)
    # MQTT 3.1.1, section 3.3.1: again is with DUP, under the old identifier. The embedded broker
    # sends again as if it were new.
    known = [packet for *_, packet in first.messages[5:]]
    again = [packet for *_, packet in second.messages[: len(known)]]
    assert (all(second.again[: len(known)]), again == known) == (
        (True, True) if isinstance(broker, Mosquitto) else (False, False)
    )


def only_the_new_filter_reaches(link: Link, heard: Heard, client: Client) -> None:
    """Publish on both until what is asked for has taken effect."""
    acknowledged = [0]

    def changed() -> bool:
        client.publish_all([("in/a", b"old"), ("more/a", b"new")])
        pump(link, lambda: not link.wants_write and not link.read(bool))
        link.acknowledge([packet for *_, packet in heard.messages[acknowledged[-1] :]])
        acknowledged.append(len(heard.messages))
        return heard.payloads()[-2:] == [b"new", b"new"]

    pump(link, changed)


def test_filters_are_changed_while_it_is_connected(broker: Broker, client: Client) -> None:
    heard = Heard()
    with subscribed(broker.port, heard) as link:
        link.subscribe(["more/#"], ["in/#"])
        only_the_new_filter_reaches(link, heard, client)
    assert heard.sessions == [False], "that it reaches us is said once"


def test_filters_of_an_earlier_connection_are_given_up(
    mosquitto: Callable[..., Mosquitto],
) -> None:
    # The embedded broker only gives up filters of the same connection.
    port = mosquitto().port
    with subscribed(port, Heard()) as link:
        link.close(TIMEOUT)
    heard = Heard()
    link = link_to(port, heard, "more/#", stale=["in/#"])
    with Client(port) as client:
        only_the_new_filter_reaches(link, heard, client)
    link.drop()


def test_says_when_there_is_more_to_read(broker: Broker, client: Client) -> None:
    heard = Heard()
    with subscribed(broker.port, heard) as link:
        client.publish_all([("in/a", b"1"), ("in/a", b"2")])
        select.select([link], [], [], TIMEOUT)
        assert link.read(lambda: True) is True
        assert not heard.messages
        pump(link, lambda: len(heard.messages) == 2)
        assert link.read(lambda: False) is False


def test_a_message_larger_than_a_chunk_comes_whole(broker: Broker, client: Client) -> None:
    heard = Heard()
    large = bytes(range(256)) * 2_000
    with subscribed(broker.port, heard) as link:
        client.publish("in/a", large)
        pump(link, lambda: heard.messages)
    assert heard.payloads() == [large]


def test_counts_what_the_broker_has_not_taken(broker: Broker, client: Client) -> None:
    heard = Heard()
    client.subscribe("out/#")
    with subscribed(broker.port, heard) as link:
        packets = [link.publish("out/a", str(n).encode(), retain=n == 2) for n in range(3)]
        assert link.waiting == 3
        assert link.wants_write
        pump(link, lambda: not link.waiting)
        assert heard.packets == packets
        came = client.wait_for(lambda ms: len(ms) == 3)
        assert [(m.payload, m.qos) for m in came] == [(b"0", 1), (b"1", 1), (b"2", 1)]
    with Client(broker.port) as late:
        late.subscribe("out/#")
        assert [m.payload for m in late.wait_for(bool)] == [b"2"]


@pytest.mark.parametrize("goodbye", [True, False])
def test_the_will_is_for_who_goes_without_a_word(
    goodbye: bool, broker: Broker, client: Client
) -> None:
    client.subscribe("will", "out")
    with subscribed(broker.port, Heard()) as link:
        if goodbye:
            link.publish("out", b"the last word")
            link.close(TIMEOUT)
    if goodbye:
        # A second will comes after the first would have come.
        with subscribed(broker.port, Heard()):
            pass
    came = client.wait_for(lambda ms: any(m.topic == "will" for m in ms))
    assert [m.topic for m in came] == (["out", "will"] if goodbye else ["will"])


def test_a_broker_that_ends_is_noticed(broker: Broker) -> None:
    with subscribed(broker.port, Heard()) as link:
        broker.kill()
        pump(link, lambda: link.lost)
    assert link.lost is not None
    assert link.lost.startswith("the connection was lost")


# ── what no broker should do ─────────────────────────────────────────────────────────────────────


class Pretender:
    """The other end of a link: says what it is told to say."""

    def __init__(self, heard: Heard, *filters: str) -> None:
        with socket.create_server((HOST, 0)) as server:
            self.link = link_to(server.getsockname()[1], heard, *filters)
            self._end, _ = server.accept()
        self.link.write()

    def say(self, *parts: bytes) -> None:
        """Send bytes, and let the link read them."""
        for part in parts:
            self._end.sendall(part)
            if self.link.lost is None:
                # The loopback delivers at once, but not always before sendall returns.
                select.select([self.link], [], [], TIMEOUT)
                self.link.read(lambda: False)
                self.link.write()

    def flood(self, content: bytes) -> None:
        """Send bytes that the link need not read yet."""
        self._end.sendall(content)

    def heard(self) -> bytes:
        """All that the link has written so far."""
        self._end.setblocking(False)
        with contextlib.suppress(BlockingIOError):
            return self._end.recv(1 << 20)
        return b""

    def close(self) -> None:
        self.link.drop()
        self._end.close()


@contextlib.contextmanager
def pretender(heard: Heard, *filters: str) -> Iterator[Pretender]:
    other = Pretender(heard, *filters)
    yield other
    other.close()


def publication(topic: bytes, payload: bytes, packet: int | None = None) -> bytes:
    """A PUBLISH packet (MQTT 3.1.1, section 3.3)."""
    body = struct.pack("!H", len(topic)) + topic
    if packet is not None:
        body += struct.pack("!H", packet)
    body += payload
    assert len(body) < 128
    return bytes([0x30 if packet is None else 0x32, len(body)]) + body


def test_reads_no_more_than_it_is_asked_to() -> None:
    heard = Heard()
    flood = [publication(b"in/a", b"%5d" % n + bytes(100)) for n in range(6_000)]

    def beyond(count: int) -> Callable[[], bool]:
        return lambda: len(heard.messages) > count

    with pretender(heard) as other:
        other.say(CONNACK, SUBACK)
        # With many publications unanswered paho reads many packets at a call.
        for _ in range(20_000):
            other.link.publish("out", b"")
        other.flood(b"".join(flood))
        batches = []
        while len(heard.messages) < len(flood):
            before = len(heard.messages)
            pump(other.link, beyond(before), full=beyond(before))
            batches.append(len(heard.messages) - before)
    assert [int(payload[:5]) for payload in heard.payloads()] == list(range(6_000))
    assert max(batches) <= mqtt._CHUNK / len(flood[0]) + 1


def test_a_topic_that_is_no_text_is_delivered_and_told_apart() -> None:
    heard = Heard()
    with pretender(heard) as other:
        other.say(CONNACK, SUBACK)
        other.say(
            publication(b"in/k\xfcche", b"1", 1),
            publication(b"in/k\xf6che", b"2", 2),
            publication("in/küche".encode(), b"3", 3),
            publication(b"in/\xed\xa0\x80", b"4"),
        )
        assert other.link.lost is None
    assert [(topic, qos, packet) for topic, _, _, qos, packet in heard.messages] == [
        ("in/k\\xfcche", 1, 1),
        ("in/k\\xf6che", 1, 2),
        ("in/küche", 1, 3),
        ("in/\\xed\\xa0\\x80", 0, 0),
    ]


def test_an_acknowledgement_is_a_puback() -> None:
    with pretender(Heard()) as other:
        other.say(CONNACK, SUBACK)
        other.heard()
        other.link.acknowledge([1, 0xABCD])
        other.link.write()
        assert other.heard() == b"\x40\x02\x00\x01\x40\x02\xab\xcd"  # MQTT 3.1.1, section 3.4


def test_refused_credentials_are_said() -> None:
    heard = Heard()
    with pretender(heard) as other:
        other.say(b"\x20\x02\x00\x05")
        assert other.link.lost == "the broker refused the connection: Not authorized"
        assert not other.link.accepted
    assert not heard.sessions


def test_one_refused_filter_is_a_refusal() -> None:
    heard = Heard()
    with pretender(heard, "a", "b", "c") as other:
        other.say(CONNACK)
        assert other.link.accepted
        other.say(b"\x90\x05\x00\x01\x01\x80\x01")
        assert other.link.lost == "the broker refused the subscription to b"
    assert not heard.sessions


def test_a_broker_that_never_answers_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    with pretender(Heard()) as other:
        other.link.read(lambda: False)
        assert other.link.lost is None
    monkeypatch.setattr(mqtt, "_ANSWER", 0.0)
    with pretender(Heard()) as other:
        other.link.read(lambda: False)
        assert other.link.lost == "the broker does not answer"


def test_the_goodbye_does_not_wait_for_a_broker_that_takes_nothing(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(mqtt, "_PARTING", 0.01)
    with pretender(Heard()) as other:
        other.say(CONNACK, SUBACK)
        other.link.publish("a", b"x")
        other.link.close(0.0)
        assert other.heard().endswith(b"\xe0\x00")  # DISCONNECT (MQTT 3.1.1, section 3.14)


def test_one_that_reads_nothing_is_never_waited_for() -> None:
    with pretender(Heard()) as other:
        other.say(CONNACK, SUBACK)
        while other.link.waiting < 50_000 and not other.link.wants_write:
            for _ in range(100):
                other.link.publish("a", bytes(10_000))
            other.link.write()
        assert other.link.wants_write
        assert other.link.lost is None


INTACT = CONNACK + SUBACK + b"".join(publication(b"in/a", b"%d" % n, n) for n in range(1, 30))


@settings(deadline=None, max_examples=25)
@given(st.lists(st.integers(0, len(INTACT))))
def test_it_does_not_matter_how_bytes_are_cut(cuts: list[int]) -> None:
    heard = Heard()
    edges = sorted({0, len(INTACT), *cuts})
    with pretender(heard) as other:
        other.say(*(INTACT[a:b] for a, b in pairwise(edges)))
        pump(other.link, lambda: len(heard.messages) == 29)
    assert heard.sessions == [False]
    assert heard.payloads() == [b"%d" % n for n in range(1, 30)]


packets = st.builds(
    lambda head, body: bytes([head, len(body)]) + body,
    st.integers(0, 255),
    st.binary(max_size=20),
)


@settings(deadline=None, max_examples=100)
@given(st.booleans(), st.lists(packets | st.binary(min_size=1, max_size=8), min_size=1))
def test_no_nonsense_raises(greeted: bool, nonsense: Iterable[bytes]) -> None:
    with pretender(Heard()) as other:
        if greeted:
            other.say(CONNACK, SUBACK)
        for part in nonsense:
            if other.link.lost is None:
                with contextlib.suppress(ConnectionError):
                    other.say(part)
        other.link.acknowledge([1])
        other.link.publish("a", b"x")
        other.link.write()
