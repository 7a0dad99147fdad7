"""Arrivals and batches."""

from __future__ import annotations

from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.entries import Connected, Message, Started
from monitor.intake import Arrival, Intake

SECOND = 1_000_000_000


class Clock:
    """A clock that says what it is told to say; nanoseconds."""

    def __init__(self, at: int) -> None:
        self.at = at

    def __call__(self) -> int:
        return self.at


def test_arrival_follows_the_monotonic_clock_only() -> None:
    wall, monotonic = Clock(1_000 * SECOND), Clock(5 * SECOND)
    arrival = Arrival(wall, monotonic, 0)
    assert arrival.now() == 1_000_000_000
    wall.at -= 900 * SECOND
    monotonic.at += 1_500
    assert arrival.now() == 1_000_000_001


def test_arrival_never_runs_behind_the_journal() -> None:
    monotonic = Clock(0)
    arrival = Arrival(Clock(10 * SECOND), monotonic, 99_000_000)
    assert arrival.now() == 99_000_000
    monotonic.at = SECOND
    assert arrival.now() == 100_000_000


messages = st.tuples(
    st.sampled_from(["a", "b/c"]),
    st.binary(max_size=4),
    st.booleans(),
    st.integers(0, 2),
    st.integers(1, 65_535),
)


@settings(deadline=None)
@given(st.lists(messages), st.booleans())
def test_a_batch_acknowledges_what_it_holds(
    came: list[tuple[str, bytes, bool, int, int]], lost: bool
) -> None:
    ticks = iter(range(10_000))
    intake = Intake(lambda: next(ticks))
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
        *(Message(at, topic, payload, r, qos) for at, (topic, payload, r, qos, _) in kept),
        Connected(99_999, True),
    ]
    assert acknowledge == [packet for _, (_, _, _, qos, packet) in kept if qos]
    assert intake.take() == ([], [])
    assert intake.unsafe == sum(not qos and not retain for _, _, retain, qos, _ in came)


def test_a_batch_is_bounded_in_messages_and_in_bytes() -> None:
    intake = Intake(lambda: 0)
    count = 0
    while not intake.full():
        intake.message("a", b"", False, 1, 1)
        count += 1
    assert 100 <= count <= 10_000
    intake.take()
    assert not intake.full()
    count = 0
    while not intake.full():
        intake.message("a", bytes(1 << 20), False, 1, 1)
        count += 1
    assert count <= 64
    intake.take()
    assert not intake.full()
