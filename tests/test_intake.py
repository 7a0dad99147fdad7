"""Arrivals and batches."""

from __future__ import annotations

from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.entries import Connected, Message, Recorded, Started
from monitor.intake import Arrival, Intake
from monitor.resends import Resends

NANO = 1_000_000_000
MICRO = 1_000_000


class Clock:
    """A clock that says what it is told to say."""

    def __init__(self, at: int) -> None:
        self.at = at

    def __call__(self) -> int:
        return self.at


def test_arrival_follows_the_monotonic_clock_only() -> None:
    wall, monotonic = Clock(1_000 * NANO), Clock(5 * NANO)
    arrival = Arrival(wall, monotonic, 0)
    assert arrival.now() == 1_000_000_000
    wall.at -= 900 * NANO
    monotonic.at += 1_500
    assert arrival.now() == 1_000_000_001


def test_arrival_never_runs_behind_the_journal() -> None:
    monotonic = Clock(0)
    arrival = Arrival(Clock(10 * NANO), monotonic, 99_000_000)
    assert arrival.now() == 99_000_000
    monotonic.at = NANO
    assert arrival.now() == 100_000_000


def test_how_long_until_an_instant() -> None:
    monotonic = Clock(0)
    arrival = Arrival(Clock(10 * NANO), monotonic, 0)
    assert arrival.until(None) == float("inf")
    assert arrival.until(12_500_000) == 2.5
    monotonic.at = 3 * NANO
    assert arrival.until(12_500_000) == 0.0


messages = st.tuples(
    st.sampled_from(["a", "b/c"]),
    st.binary(max_size=4),
    st.booleans(),
    st.integers(0, 2),
    st.integers(1, 65_535),
    st.booleans(),
)


@settings(deadline=None)
@given(st.lists(messages), st.booleans())
def test_a_batch_acknowledges_what_it_holds(
    came: list[tuple[str, bytes, bool, int, int, bool]], lost: bool
) -> None:
    ticks = iter(range(10_000))
    intake = Intake(lambda: next(ticks), Resends())
    intake.note(Started(-1))
    for message in came:
        intake.message(*message)
    intake.note(Connected(99_999, True))
    if lost:
        intake.connection_lost()
    entries, acknowledge = intake.take()
    kept = [m for m in enumerate(came) if not (lost and m[1][3])]
    assert entries == [
        Started(-1),
        *(
            Message(at, topic, payload, retain, qos, packet)
            for at, (topic, payload, retain, qos, packet, _) in kept
        ),
        Connected(99_999, True),
    ]
    assert acknowledge == [packet for _, (*_, qos, packet, _) in kept if qos]
    assert intake.take() == ([], [])
    assert intake.unsafe == sum(not qos and not retain for _, _, retain, qos, *_ in came)


def test_a_batch_is_bounded_in_messages_and_in_bytes() -> None:
    intake = Intake(lambda: 0, Resends())
    count = 0
    while not intake.full():
        intake.message("a", b"", False, 1, 1, False)
        count += 1
    assert 100 <= count <= 10_000
    intake.take()
    assert not intake.full()
    count = 0
    while not intake.full():
        intake.message("a", bytes(1 << 20), False, 1, 1, False)
        count += 1
    assert count <= 64
    intake.take()
    assert not intake.full()


def test_what_died_with_its_connection_takes_no_room() -> None:
    intake = Intake(lambda: 0, Resends())
    while not intake.full():
        intake.message("a", bytes(1 << 20), False, 1, 1, False)
    intake.connection_lost()
    assert not intake.full(), "the next connection could not even be answered"


# ── what is sent again ───────────────────────────────────────────────────────────────────────────


def value(text: bytes, packet: int = 500) -> Message:
    return Message(0, "a", text, qos=1, packet=packet)


class Resumed:
    """An intake after a reconnect to a broker that sends again as if it were new; three messages
    were journaled before."""

    def __init__(self, *journaled: bytes) -> None:
        self.clock = Clock(0)
        self.resends = Resends(enumerate(map(value, journaled), 1))
        self.intake = Intake(self.clock, self.resends)
        self.resends.reconnected()
        self.packets = iter(range(1_000, 2_000))

    def come(self, *payloads: bytes) -> None:
        for payload in payloads:
            self.clock.at += 1
            self.intake.message("a", payload, False, 1, next(self.packets), False)

    def taken(self) -> list[bytes]:
        entries, _ = self.intake.take()
        return [entry.payload for entry in entries if isinstance(entry, Message)]


def test_what_was_journaled_is_only_acknowledged() -> None:
    resumed = Resumed(b"1", b"2", b"3")
    resumed.come(b"2", b"3", b"4")
    entries, acknowledge = resumed.intake.take()
    assert [entry.payload for entry in entries if isinstance(entry, Message)] == [b"4"]
    assert acknowledge == [1_000, 1_001, 1_002]


def test_nothing_is_taken_before_it_can_be_told_what_is_new() -> None:
    resumed = Resumed(b"1", b"2", b"1", b"3")
    resumed.come(b"1")
    assert resumed.intake.take() == ([], [])
    assert resumed.intake.holding
    resumed.come(b"3", b"4")
    assert resumed.taken() == [b"4"]
    assert not resumed.intake.holding


def test_what_cannot_be_told_is_new_once_nothing_follows() -> None:
    resumed = Resumed(b"1", b"2", b"3")
    started: Recorded = Started(0)
    resumed.intake.note(started)
    resumed.come(b"1")
    assert resumed.intake.take() == ([started], []), "what came before waits for nothing"
    resumed.clock.at += 10 * MICRO
    assert resumed.intake.take() == ([Message(1, "a", b"1", qos=1, packet=1_000)], [1_000])


def test_nothing_is_held_for_what_never_comes_again() -> None:
    resumed = Resumed(b"1", b"2", b"3")
    connected = Connected(1, True)
    resumed.intake.note(connected)
    assert resumed.intake.take() == ([connected], [])
    assert resumed.resends.matching
    resumed.clock.at += 10 * MICRO
    resumed.intake.take()
    assert not resumed.resends.matching
    resumed.come(b"3")
    assert resumed.taken() == [b"3"]


def test_a_broker_that_answers_late_is_waited_for() -> None:
    resumed = Resumed(b"1", b"2", b"3")
    resumed.clock.at += 10 * MICRO  # it has not said yet that we are subscribed
    resumed.intake.take()
    resumed.come(b"3")
    assert resumed.taken() == []


def test_what_stands_before_it_is_taken_and_acknowledged() -> None:
    # The broker may send no more before it has acknowledgements, and wants them in order.
    resumed = Resumed(b"1", b"2", b"1", b"3")
    resumed.clock.at = 5
    resumed.intake.message("b", b"7", False, 1, 1, False)
    resumed.come(b"1")
    resumed.intake.message("b", b"8", False, 1, 2, False)
    assert resumed.intake.take() == ([Message(5, "b", b"7", qos=1, packet=1)], [1])
    assert resumed.intake.holding
    resumed.come(b"3")
    assert resumed.intake.take() == ([Message(6, "b", b"8", qos=1, packet=2)], [1_000, 2, 1_001])


def test_much_that_is_new_elsewhere_does_not_put_it_off_for_ever() -> None:
    resumed = Resumed(b"1", b"2", b"3")
    resumed.intake.note(Connected(1, True))
    for _ in range(100):
        resumed.clock.at += MICRO
        resumed.intake.message("b", b"7", False, 1, 1, False)
        resumed.intake.take()
    assert not resumed.resends.matching


def test_what_is_held_dies_with_its_connection_too() -> None:
    resumed = Resumed(b"1", b"2", b"3")
    resumed.come(b"1")
    assert resumed.taken() == []
    resumed.intake.connection_lost()
    assert not resumed.intake.holding
    resumed.resends.reconnected()
    resumed.come(b"1", b"2", b"3", b"4")
    assert resumed.taken() == [b"4"]
