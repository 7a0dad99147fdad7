"""What is sent again after a reconnect, told from what is new."""

from __future__ import annotations

import random
from collections import deque
from collections.abc import Iterable, Sequence
from itertools import count, pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.entries import Connected, Message, Recorded, Started
from monitor.intake import Intake
from monitor.resends import Resends
from monitor.times import SECOND

MOST = 65_535


def message(payload: bytes, packet: int = 0, topic: str = "a") -> Message:
    return Message(0, topic, payload, qos=1, packet=packet)


def reconnected(journaled: Iterable[Recorded], proven: int = 0) -> Resends:
    """After a start with a journal that holds these entries."""
    resends = Resends(enumerate(journaled, proven + 1), proven)
    resends.reconnected()
    return resends


# ── brokers that send again as MQTT demands ──────────────────────────────────────────────────────


def ask(resends: Resends, *came: tuple[Message, bool], final: bool = False) -> list[bytes] | None:
    """Payloads of what came again; None where that is not told of all yet."""
    found, told = resends.again(came, final=final)
    return [each.payload for each in found] if told == len(came) else None


def test_dup_and_the_old_identifier_tell() -> None:
    resends = reconnected([message(b"1", 7), message(b"1", 8), message(b"1", 9)])
    came = [(message(b"1", 8), True), (message(b"1", 9), True), (message(b"1", 10), False)]
    assert ask(resends, *came) == [b"1", b"1"]
    assert not resends.matching


def test_dup_alone_proves_nothing() -> None:
    # A broker marks what it sent and we never took, too.
    resends = reconnected([message(b"1", 7), message(b"1", 8)])
    came = [(message(b"1", 8), True), (message(b"1", 9), True), (message(b"1", 10), True)]
    assert ask(resends, *came) == [b"1"]


def test_an_identifier_alone_proves_nothing() -> None:
    resends = reconnected([message(b"1", 7), message(b"2", 8)])
    assert ask(resends, (message(b"3", 8), True)) == []
    resends = reconnected([message(b"1", 7), message(b"2", 8)])
    assert ask(resends, (message(b"2", 8, "b"), True)) == []


def test_identifiers_that_come_round_again_are_new() -> None:
    resends = reconnected([message(b"1", n) for n in (7, 8, 9)])
    came = [(message(b"1", 9), True), (message(b"1", 7), True)]
    assert ask(resends, *came) == [b"1"]


def test_who_goes_on_counting_sends_nothing_again_without_dup() -> None:
    resends = reconnected([message(b"1", 7), message(b"1", 8)])
    assert ask(resends, (message(b"1", 9), False)) == []
    assert not resends.matching
    resends = reconnected([message(b"1", MOST)])
    assert ask(resends, (message(b"1", 1), False)) == [], "after the last identifier comes 1"


def test_it_goes_on_from_batch_to_batch() -> None:
    resends = reconnected([message(b"1", n) for n in range(1, 7)])
    assert ask(resends, (message(b"1", 3), True)) == [b"1"]
    assert resends.matching
    assert ask(resends, *((message(b"1", n), True) for n in (4, 5))) == [b"1", b"1"]
    assert ask(resends, (message(b"1", 6), True), (message(b"1", 7), False)) == [b"1"]
    assert not resends.matching


# ── brokers that send again as if it were new ────────────────────────────────────────────────────


def new(*payloads: bytes, topic: str = "a") -> list[tuple[Message, bool]]:
    return [(message(payload, n, topic), False) for n, payload in enumerate(payloads, 1)]


def test_the_longest_end_of_what_was_journaled_tells() -> None:
    journaled = [message(p, n + 100) for n, p in enumerate([b"1", b"2", b"1", b"2", b"3"])]
    for came, again in (
        ([b"2", b"3", b"4"], 2),
        ([b"1", b"2", b"3", b"1"], 3),
        ([b"1", b"2", b"1", b"2", b"3"], 5),
        ([b"3", b"3"], 1),
        ([b"1", b"2", b"4"], 0),
        ([b"4"], 0),
    ):
        found = ask(reconnected(journaled), *new(*came))
        assert found == came[:again]


def test_an_end_that_does_not_come_whole_is_none() -> None:
    # What the broker sends again, it sends to its end.
    journaled = [message(b"1", 101), message(b"2", 102), message(b"3", 103)]
    resends = reconnected(journaled)
    assert ask(resends, *new(b"1", b"2")) is None
    assert ask(resends, *new(b"1", b"2", b"4")) == []
    assert ask(reconnected(journaled), *new(b"1", b"2"), final=True) == []
    assert ask(reconnected(journaled), *new(b"3"), final=True) == [b"3"]


def test_each_topic_has_an_order_of_its_own() -> None:
    journaled = [message(b"1", 101, "a"), message(b"5", 102, "b"), message(b"2", 103, "a")]
    came = [*new(b"5", b"6", topic="b"), *new(b"1", b"2", b"3")]
    assert ask(reconnected(journaled), *came) == [b"5", b"1", b"2"]


def test_a_broker_that_waits_for_acknowledgements_sends_the_rest_later() -> None:
    resends = reconnected([message(b"%d" % n, n + 100) for n in range(50)])
    first, rest = [b"%d" % n for n in range(10, 30)], [b"%d" % n for n in range(30, 51)]
    assert ask(resends, *new(*first)) is None
    assert ask(resends, *new(*first), final=True) == first
    assert ask(resends, *new(*rest)) == rest[:-1]
    assert not resends.matching


@pytest.mark.parametrize("size", [65_535, 65_600])
def test_payloads_that_never_change_cost_no_more_than_others(size: int) -> None:
    resends = reconnected([message(b"1", n % MOST + 1) for n in range(size)])
    came = [(message(b"1", n + 5), False) for n in range(99)] + [(message(b"2", 999), False)]
    assert ask(resends, *came) == [b"1"] * 99
    resends = reconnected([*(message(b"1", 9) for _ in range(size)), message(b"2", 9)])
    assert ask(resends, *came) == [b"1"] * 99 + [b"2"]


payloads = st.lists(st.sampled_from([b"1", b"2"]), max_size=7)


def longest_end_that_begins(ours: Sequence[bytes], theirs: Sequence[bytes]) -> int:
    """By trying all."""
    most = min(len(ours), len(theirs))
    return next(n for n in range(most, -1, -1) if ours[len(ours) - n :] == theirs[:n])


@settings(deadline=None)
@given(st.dictionaries(st.sampled_from("abc"), payloads), payloads, st.data())
def test_it_does_not_matter_how_what_comes_is_cut(
    ours: dict[str, list[bytes]], theirs: list[bytes], data: st.DataObject
) -> None:
    topics = data.draw(st.lists(st.sampled_from("abcd"), min_size=len(theirs), max_size=99))
    mixed = [(topic, p) for topic in ours for p in ours[topic]]
    came = [(message(p, 999, topic), False) for topic, p in zip(topics, theirs, strict=False)]
    resends = reconnected(message(p, 5, topic) for topic, p in mixed)
    cuts = data.draw(st.lists(st.integers(0, len(came)), max_size=4))
    found: list[Message] = []
    held: list[tuple[Message, bool]] = []
    edges = sorted({0, len(came), *cuts})
    for begin, end in pairwise(edges):
        held += came[begin:end]
        again, told = resends.again(held, final=end == len(came))
        found, held = found + again, held[told:]
    by_topic = {
        topic: [m.payload for m, _ in came if m.topic == topic] for topic in {*topics, *ours}
    }
    expected = {
        topic: messages[: longest_end_that_begins(ours.get(topic, []), messages)]
        for topic, messages in by_topic.items()
    }
    assert {topic: [m.payload for m in found if m.topic == topic] for topic in by_topic} == expected


# ── what is known of the broker ──────────────────────────────────────────────────────────────────


def test_what_the_broker_has_our_word_for_cannot_come_again() -> None:
    resends = Resends()
    resends.journaled(1, [message(b"1", 101), Started(0), message(b"2", 102)])
    resends.proof(packet=1, position=3)
    resends.journaled(4, [message(b"3", 103)])
    resends.proof(packet=1, position=4)  # nothing was published since
    resends.taken(1)
    assert resends.proven == 3
    resends.reconnected()
    assert ask(resends, *new(b"2", b"3")) == [], "the second was not sent again"
    resends.reconnected()
    assert ask(resends, *new(b"3", b"2")) == [b"3"]


def test_each_publication_is_a_proof_of_its_own() -> None:
    resends = Resends()
    for n in range(1, 5):
        resends.journaled(n, [message(b"%d" % n, n)])
        resends.proof(packet=n, position=n)
    resends.taken(1)
    assert resends.proven == 1
    resends.taken(3)
    resends.taken(2)
    resends.taken(9)
    assert resends.proven == 3


def test_nothing_is_proven_while_messages_may_come_again() -> None:
    resends = reconnected([message(b"%d" % n, n) for n in range(1, 6)])
    assert ask(resends, (message(b"3", 3), True)) == [b"3"]
    resends.proof(packet=1, position=5)
    resends.taken(1)
    assert resends.proven == 0, "the last two were not acknowledged on this connection"
    resends.reconnected()
    again = [(message(b"%d" % n, n), True) for n in (4, 5)]
    assert ask(resends, *again, (message(b"6", 6), False)) == [b"4", b"5"]
    resends.proof(packet=1, position=5)
    resends.taken(1)
    assert resends.proven == 5


def test_a_word_for_the_connection_before_is_none_for_this_one() -> None:
    resends = Resends()
    resends.journaled(1, [message(b"1", 101)])
    resends.proof(packet=1, position=1)
    resends.reconnected()
    resends.taken(1)
    assert resends.proven == 0


def test_who_has_forgotten_us_sends_nothing_again() -> None:
    resends = reconnected([message(b"1", 101)])
    resends.session_gone()
    assert not resends.matching
    resends.reconnected()
    assert not resends.matching


def test_what_is_folded_and_not_durable_yet_may_come_again_too() -> None:
    resends = Resends(enumerate([message(b"1", 101)], 1))
    resends.reconnected([Started(0), message(b"2", 102), Message(0, "a", b"3", qos=0)])
    assert ask(resends, *new(b"1", b"2", b"3")) == [b"1", b"2"]


# ── against brokers that lose acknowledgements ───────────────────────────────────────────────────


class Keeps:
    """A broker that sends again with DUP under the old identifiers, as mosquitto does."""

    window = 20

    def __init__(self, chance: random.Random) -> None:
        self.chance = chance
        self.waiting: deque[tuple[str, bytes]] = deque()
        self.in_flight: deque[tuple[int, str, bytes]] = deque()
        self.unsent = 0
        self.again = 0
        self.packet = MOST - 30

    def connect(self) -> None:
        self.unsent = self.again = len(self.in_flight)

    def send(self) -> tuple[str, bytes, int, bool] | None:
        """The next message, if any may be sent now."""
        if self.unsent:
            packet, topic, payload = self.in_flight[-self.unsent]
            self.unsent -= 1
            return topic, payload, packet, True
        if not self.waiting or len(self.in_flight) >= self.window:
            return None
        self.packet = self.packet % MOST + 1
        self.in_flight.append((self.packet, *self.waiting.popleft()))
        return *self.in_flight[-1][1:], self.packet, False

    def acknowledged(self, packet: int) -> None:
        assert self.in_flight.popleft()[0] == packet, "acknowledged out of order"


class Renews(Keeps):
    """One that sends again as if it were new, as iotcore does: each topic in its order, but of one
    as long as there is anything before it turns to another."""

    turn = "a"

    def connect(self) -> None:
        self.waiting.extendleft(reversed([each[1:] for each in self.in_flight]))
        self.in_flight.clear()
        self.packet = 0
        self.turn = self.chance.choice("ab")

    def send(self) -> tuple[str, bytes, int, bool] | None:
        ready = [each for each in self.waiting if each[0] == self.turn]
        if not ready:
            self.turn = "b" if self.turn == "a" else "a"
            ready = [each for each in self.waiting if each[0] == self.turn]
        if ready:
            self.waiting.remove(ready[0])
            self.waiting.appendleft(ready[0])
        return super().send()


class Client:
    """Intake, journal and acknowledgements, as the daemon has them."""

    def __init__(self, broker: Keeps) -> None:
        self.broker = broker
        self.now = 0
        self.journal: list[Message] = []
        self.noted = 0
        self.packets = count(1)
        self.sent: list[tuple[str, int]] = []
        self.answers: list[int] = []
        self.start()

    def start(self) -> None:
        """As after a kill: only the journal and what is noted in it are left."""
        unproven = list(enumerate(self.journal, 1))[self.noted :]
        self.resends = Resends(unproven, self.noted)
        self.intake = Intake(lambda: self.now, self.resends)
        self.connect()

    def connect(self) -> None:
        self.sent, self.answers = [], []
        self.packets = count(1)
        self.broker.connect()
        self.resends.reconnected()
        self.intake.note(Connected(self.now, True))

    def receive(self) -> bool:
        came = self.broker.send()
        if came is not None:
            self.now += 1
            topic, payload, packet, dup = came
            self.intake.message(topic, payload, False, 1, packet, dup)
        return came is not None

    def commit(self) -> None:
        entries, acknowledge = self.intake.take()
        taken = [each for each in entries if isinstance(each, Message)]
        self.noted = self.resends.proven
        self.resends.journaled(len(self.journal) + 1, taken)
        self.journal += taken
        self.sent += [("acknowledge", packet) for packet in acknowledge]

    def publish(self) -> None:
        packet = next(self.packets)
        self.sent.append(("publish", packet))
        self.resends.proof(packet, len(self.journal))

    def deliver(self, how_many: int) -> None:
        """So much of what was sent reaches the broker."""
        for what, packet in self.sent[:how_many]:
            if what == "publish":
                self.answers.append(packet)
            else:
                self.broker.acknowledged(packet)
        del self.sent[:how_many]

    def hear(self) -> None:
        if self.answers:
            self.resends.taken(self.answers.pop(0))

    def lose(self, *, killed: bool) -> None:
        self.deliver(self.broker.chance.randint(0, len(self.sent)))
        if killed:
            self.start()
            return
        self.intake.connection_lost()
        self.connect()

    def finish(self) -> None:
        """Until all that was published is here, or nothing moves any more."""
        for _ in range(5):
            while self.receive():
                self.commit()
                self.deliver(len(self.sent))
            self.now += 10 * SECOND
            self.commit()
            self.deliver(len(self.sent))


def live(broker: Keeps, published: list[tuple[str, bytes]]) -> list[tuple[str, bytes]]:
    """What the journal holds after a life in which everything goes wrong now and then."""
    chance, client, left = broker.chance, Client(broker), deque(published)
    for _ in range(400):
        match chance.choice("ppprrrrrrccddwwhhlk"):
            case "p" if left:
                broker.waiting.append(left.popleft())
            case "r":
                client.receive()
            case "c":
                client.commit()
            case "d":
                client.deliver(chance.randint(0, len(client.sent)))
            case "w":
                client.publish()
            case "h":
                client.hear()
            case "l" | "k" as how if chance.random() < 0.4:
                client.lose(killed=how == "k")
    broker.waiting += left
    client.finish()
    return [(each.topic, each.payload) for each in client.journal]


@settings(deadline=None, max_examples=150)
@given(st.randoms(use_true_random=False), st.integers(1, 3))
def test_a_broker_that_keeps_to_mqtt_may_send_anything(chance: random.Random, levels: int) -> None:
    published = [(chance.choice("ab"), b"%d" % chance.randrange(levels)) for _ in range(150)]
    assert live(Keeps(chance), published) == published


@settings(deadline=None, max_examples=150)
@given(st.randoms(use_true_random=False))
def test_one_that_does_not_is_understood_where_payloads_differ(chance: random.Random) -> None:
    published = [(chance.choice("ab"), b"%d" % n) for n in range(150)]
    found = live(Renews(chance), published)
    for topic in "ab":
        assert [p for t, p in found if t == topic] == [p for t, p in published if t == topic]


def test_values_that_repeat_are_not_often_mistaken() -> None:
    # Of a broker that gives no other sign, only what stands in the journal can be known.
    wrong = total = 0
    for seed in range(30):
        chance = random.Random(seed)
        published = [("a", b"%.2f" % chance.gauss(2.0, 0.11)) for _ in range(150)]
        found = live(Renews(chance), published)
        wrong += abs(len(found) - len(published)) if found != published else 0
        total += len(published)
    assert wrong < total / 200
