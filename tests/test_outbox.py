"""Alerts between the journal and the broker."""

from __future__ import annotations

import random
from itertools import count

from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, invariant, rule

from monitor.outbox import Outbox

IN_FLIGHT = 3


class OutboxMachine(RuleBasedStateMachine):
    """Any order of alerts, acknowledgements and lost connections."""

    def __init__(self) -> None:
        super().__init__()
        self.outbox = Outbox()
        self.packets = count(1)
        self.places = count(1)
        self.open: list[int] = []
        self.sent: dict[int, int] = {}

    @rule()
    def add(self) -> None:
        place = next(self.places)
        self.outbox.extend([(place, f"topic/{place}", str(place).encode())])
        self.open.append(place)

    @rule()
    def send(self) -> None:
        for waiting in self.outbox.to_send(IN_FLIGHT):
            assert waiting.topic == f"topic/{waiting.place}"
            assert waiting.payload == str(waiting.place).encode()
            # The oldest that is not out.
            assert waiting.place == min(set(self.open) - set(self.sent.values()))
            packet = next(self.packets)
            self.outbox.sent(packet)
            self.sent[packet] = waiting.place
        assert len(self.sent) == min(IN_FLIGHT, len(self.open))

    @rule(chance=st.randoms(use_true_random=False))
    def acknowledge(self, chance: random.Random) -> None:
        assert self.outbox.acknowledged(0) is None
        if self.sent:
            packet = chance.choice(list(self.sent))
            place = self.sent.pop(packet)
            assert self.outbox.acknowledged(packet) == place
            assert self.outbox.acknowledged(packet) is None
            self.open.remove(place)

    @rule()
    def lose_the_connection(self) -> None:
        self.outbox.connection_lost()
        self.sent.clear()

    @invariant()
    def nothing_is_forgotten(self) -> None:
        assert len(self.outbox) == len(self.open)


OutboxMachine.TestCase.settings = settings(max_examples=50, stateful_step_count=30, deadline=None)
TestOutbox = OutboxMachine.TestCase
