"""Subgroups by window through the engine: when a window closes, what is late for it, and that
neither ticks nor outages change anything but when its points appear.

The reference below works from the contract's words with nothing but lists: a reading belongs to the
UTC-aligned window that its own time lies in; a window ends with a reading of a later one, or once
as much time was watched as its gauge's clock had left at the latest reading, and a second.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

import orjson
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plans import GAUGE, START, characteristic, engine, events, fold, message, points, shewhart

from monitor import messages
from monitor.engine import Engine
from monitor.entries import Connected, Disconnected, Entry, Message, Started, Tick
from monitor.outputs import Alert, Output, Points, SetAside
from monitor.plan import ByWindow, CharacteristicPlan, CusumPlan, EwmaPlan, SourcePlan
from monitor.times import SECOND, format_time, parse_iso_time

TENTH = SECOND // 10
GRACE = SECOND

HEADS = replace(GAUGE, topic="line/weight", stream=(("head", ("head",)),))
UNNUMBERED = replace(HEADS, topic="line/torque", sequence=None)
UNTIMED = SourcePlan("line/glue", (), "number")


def windowed(
    window: int, min_size: int = 1, *, name: str = "weight", source: SourcePlan = HEADS
) -> CharacteristicPlan:
    """Judged by a mean chart that signals beyond one standard error, and by sums and averages."""
    plan = characteristic(
        shewhart(chart="mean", width=1.0),
        CusumPlan("mean", 0.5, 3.0),
        EwmaPlan("mean", 0.2, 2.0),
        name=name,
        source=source,
    )
    return replace(plan, subgroup=ByWindow(window, min_size))


def taken(at: int, value: float = 0.0, head: int = 1, arrival: int | None = None) -> Message:
    """A reading of ``HEADS`` at tenths of a second after the start, numbered by its time."""
    document = {"v": value, "t": (START + at * TENTH) / SECOND, "n": at, "head": head}
    came = at if arrival is None else arrival
    return replace(message(document, topic=HEADS.topic), time=START + came * TENTH)


def tick(at: int) -> Tick:
    return Tick(START + at * TENTH)


def windows(outputs: Sequence[Output]) -> list[tuple[int, tuple[float, ...]]]:
    """Number and values of each subgroup."""
    return [(p.subgroup.number, p.subgroup.values) for p in points(outputs)]


# One window at a time. The tests' readings start at 06:41:12.


def test_windows_start_with_the_minutes_of_utc() -> None:
    watching = engine(windowed(60 * SECOND))
    readings = [taken(at, float(at)) for at in (0, 479, 480, 1_079, 1_080)]
    made = [p.subgroup for p in points(fold(watching, readings))]
    assert [s.values for s in made] == [(0.0, 479.0), (480.0, 1_079.0)]
    assert [format_time(s.first) for s in made] == [
        "2026-03-02T06:41:12.000Z",
        "2026-03-02T06:42:00.000Z",
    ]
    assert [format_time(s.last) for s in made] == [
        "2026-03-02T06:41:59.900Z",
        "2026-03-02T06:42:59.900Z",
    ]


@pytest.mark.parametrize(
    ("window", "first", "second"),
    [
        (SECOND, "2026-03-02T06:41:12.900Z", "2026-03-02T06:41:13.000Z"),
        (3_600 * SECOND, "2026-03-02T06:59:59.900Z", "2026-03-02T07:00:00.000Z"),
        (86_400 * SECOND, "2026-03-02T23:59:59.900Z", "2026-03-03T00:00:00.000Z"),
        (7 * SECOND, "1970-01-01T00:00:06.900Z", "1970-01-01T00:00:07.000Z"),
        (7 * SECOND, "1969-12-31T23:59:59.900Z", "1970-01-01T00:00:00.000Z"),
    ],
)
def test_a_window_holds_its_start_and_not_its_end(window: int, first: str, second: str) -> None:
    watching = engine(windowed(window))
    times = [parse_iso_time(text) for text in (first, second)]
    documents = [{"v": n, "t": t / SECOND, "n": n, "head": 1} for n, t in enumerate(times)]
    arrived = [replace(message(d, topic=HEADS.topic), time=times[1]) for d in documents]
    outputs = fold(watching, arrived)
    assert windows(outputs) == [(1, (0.0,))]
    assert points(outputs)[0].subgroup.last == times[0]


def test_a_reading_of_a_later_window_closes_at_once() -> None:
    watching = engine(windowed(10 * SECOND))
    assert windows(watching.fold(taken(70))) == []
    assert windows(watching.fold(taken(80, arrival=81))) == [(1, (0.0,))]


def test_empty_windows_are_nobodys() -> None:
    watching = engine(windowed(10 * SECOND))
    outputs = fold(watching, [taken(0, 1.0), taken(995, 2.0), taken(2_000, 3.0)])
    assert windows(outputs) == [(1, (1.0,)), (2, (2.0,))]
    assert watching.counts.abandoned == 0


def test_too_few_readings_are_abandoned_and_take_no_number() -> None:
    watching = engine(windowed(10 * SECOND, min_size=2))
    outputs = fold(watching, [taken(at, float(at)) for at in (0, 1, 100, 200, 201, 202, 300)])
    assert windows(outputs) == [(1, (0.0, 1.0)), (2, (200.0, 201.0, 202.0))]
    assert (watching.counts.subgroups, watching.counts.abandoned) == (2, 1)
    watching.fold(tick(1_000))
    assert (watching.counts.subgroups, watching.counts.abandoned) == (2, 2)


def test_without_another_reading_a_window_closes_a_second_after_its_end() -> None:
    watching = engine(windowed(10 * SECOND))
    watching.fold(taken(30, 4.0))  # 06:41:15; its window ends at 06:41:20
    due = watching.next_deadline()
    assert due == parse_iso_time("2026-03-02T06:41:21Z")
    assert list(watching.fold(Tick(due - 1))) == []
    assert watching.next_deadline() == due
    outputs = watching.fold(Tick(due))
    assert windows(outputs) == [(1, (4.0,))]
    assert watching.next_deadline() is None
    assert list(watching.fold(Tick(due + 1))) == []
    # What it says is of when it was measured, whatever closed it.
    (event,) = events(outputs)
    assert event["time"] == "2026-03-02T06:41:15.000Z"
    assert event["subgroup"] is not None
    assert event["subgroup"]["last"] == "2026-03-02T06:41:15.000Z"


def test_another_streams_message_closes_first_and_is_read_then() -> None:
    watching = engine(windowed(10 * SECOND), points=True)
    watching.fold(taken(70, 1.0, head=1))
    outputs = watching.fold(taken(95, 2.0, head=2))
    assert [(p.stream, p.subgroup.values) for p in points(outputs)] == [((("head", "1"),), (1.0,))]
    assert watching.counts.readings == 2


@pytest.mark.parametrize("payload", [b"oops", b'{"v": null}'])
def test_so_does_a_message_that_is_set_aside(payload: bytes) -> None:
    watching = engine(windowed(10 * SECOND))
    watching.fold(taken(70, 1.0))
    outputs = watching.fold(Message(START + 90 * TENTH, HEADS.topic, payload))
    assert [type(output) for output in outputs] == [Points, SetAside]


def test_windows_that_are_due_together_close_in_the_order_of_deadline_and_stream() -> None:
    watching = engine(windowed(10 * SECOND), windowed(5 * SECOND, name="torque", source=UNNUMBERED))
    arrivals = [(1, 29), (3, 30), (10, 30), (2, 30)]
    fold(watching, [taken(30, float(head), head, arrival) for head, arrival in arrivals])
    now = (START + 30 * TENTH) / SECOND
    watching.fold(message({"v": 0, "t": now, "head": 9}, 3.0, UNNUMBERED.topic))
    outputs = watching.fold(tick(10_000))
    assert [(p.characteristic.name, *dict(p.stream).values()) for p in points(outputs)] == [
        ("weight", "1"),  # a tenth of a second before the others
        ("torque", "9"),
        ("weight", "10"),
        ("weight", "2"),
        ("weight", "3"),
    ]


# Late readings


def test_a_reading_of_a_closed_window_is_late() -> None:
    watching = engine(windowed(10 * SECOND))
    fold(watching, [taken(60, 1.0), tick(90)])
    outputs = fold(watching, [taken(75, 2.0, arrival=91), taken(79, 3.0, arrival=92)])
    assert [o.reason for o in outputs if isinstance(o, SetAside)] == ["late", "late"]
    outputs = fold(watching, [taken(80, 4.0, arrival=93), tick(10_000)])
    assert windows(outputs) == [(2, (4.0,))]
    assert watching.counts.readings == 2


def test_a_window_is_closed_to_its_last_microsecond() -> None:
    watching = engine(windowed(10 * SECOND))
    fold(watching, [taken(60), tick(90)])
    for microsecond, late in ((-1, ["late"]), (0, [])):
        time = START + 80 * TENTH + microsecond
        document = {"v": 0.0, "t": format_time(time), "n": 80, "head": 1}
        outputs = watching.fold(message(document, 9.1, HEADS.topic))
        assert [o.reason for o in outputs if isinstance(o, SetAside)] == late


def test_without_numbers_it_is_closed_as_well() -> None:
    watching = engine(windowed(10 * SECOND, source=UNNUMBERED))
    readings = [replace(taken(at, arrival=at + 20), topic=UNNUMBERED.topic) for at in (60, 79)]
    outputs = fold(watching, [readings[0], tick(110), readings[1]])
    assert [o.reason for o in outputs if isinstance(o, SetAside)] == ["late"]


def test_one_that_was_read_and_comes_again_is_repeated() -> None:
    watching = engine(windowed(10 * SECOND))
    fold(watching, [taken(55), taken(60), tick(90)])
    outputs = fold(watching, [taken(60, arrival=91), taken(55, arrival=92), taken(61, arrival=93)])
    assert [o.reason for o in outputs if isinstance(o, SetAside)] == [
        "repeated",
        "repeated",
        "late",
    ]


def test_a_window_that_was_given_up_is_closed_too() -> None:
    watching = engine(windowed(10 * SECOND, min_size=2))
    fold(watching, [taken(60), tick(90)])
    outputs = watching.fold(taken(79, arrival=91))
    assert [o.reason for o in outputs if isinstance(o, SetAside)] == ["late"]
    assert watching.counts.abandoned == 1


def test_other_streams_windows_stay_open() -> None:
    watching = engine(windowed(10 * SECOND))
    outputs = fold(watching, [taken(60, head=1), tick(90), taken(75, head=2, arrival=91)])
    assert [o.reason for o in outputs if isinstance(o, SetAside)] == []


def test_a_gauge_restart_abandons_what_was_gathered() -> None:
    watching = engine(windowed(10 * SECOND))
    fold(watching, [taken(0, 1.0), taken(5, 2.0)])
    restarted = {"v": 3.0, "t": (START + 7 * TENTH) / SECOND, "n": 0, "head": 1}
    outputs = watching.fold(message(restarted, 0.7, HEADS.topic))
    assert windows(outputs) == []
    assert watching.counts.abandoned == 1
    assert windows(watching.fold(tick(10_000))) == [(1, (3.0,))]


# The gauge's clock is not ours


@pytest.mark.parametrize("skew", [-36_000, -37, 37, 2_990])
def test_a_window_is_given_its_time_by_the_gauges_own_clock(skew: int) -> None:
    watching = engine(windowed(10 * SECOND))
    # By the gauge's clock 0.5 s are left of its window, wherever that clock stands.
    outputs = fold(watching, [taken(at, 1.0, arrival=at - skew) for at in (74, 75)])
    due = START + (75 - skew + 5) * TENTH + GRACE
    assert watching.next_deadline() is not None
    outputs += list(watching.fold(Tick(due - 1)))
    assert windows(outputs) == []
    assert windows(watching.fold(Tick(due))) == [(1, (1.0, 1.0))]


def test_what_an_outage_held_back_is_not_cut_short() -> None:
    watching = engine(windowed(10 * SECOND))
    before = [taken(at, float(at)) for at in range(0, 30, 5)]
    outage: list[Entry] = [Disconnected(START + 40 * TENTH), Connected(START + 6_000 * TENTH, True)]
    backlog = [taken(at, float(at), arrival=6_000 + at // 100) for at in range(30, 6_000, 5)]
    outputs = fold(watching, [*before, *outage, *backlog])
    assert [o for o in outputs if isinstance(o, SetAside)] == []
    sizes = [len(values) for _, values in windows(outputs)]
    assert sizes == [16] + [20] * 59  # 06:41:12 to :20, then every ten seconds
    undisturbed = [taken(at, float(at)) for at in range(0, 6_000, 5)]
    assert windows(fold(engine(windowed(10 * SECOND)), undisturbed)) == windows(outputs)


def test_our_outage_is_not_the_gauges() -> None:
    watching = engine(windowed(10 * SECOND))
    watching.fold(taken(70, 1.0))  # 2 s of it left
    assert list(watching.fold(Disconnected(START + 75 * TENTH))) == []
    assert watching.next_deadline() is None
    assert list(watching.fold(tick(5_000))) == []
    assert list(watching.fold(Started(START + 6_000 * TENTH))) == []
    assert list(watching.fold(Connected(START + 7_000 * TENTH, False))) == []
    due = START + 7_020 * TENTH
    assert watching.next_deadline() == due
    assert list(watching.fold(Tick(due - 1))) == []
    assert windows(watching.fold(Tick(due))) == [(1, (1.0,))]


def test_a_stop_that_nobody_noted_counts_from_the_last_message() -> None:
    watching = engine(windowed(10 * SECOND))
    watching.fold(taken(70, 1.0))
    outputs = fold(watching, [Started(START + 900 * TENTH), Connected(START + 901 * TENTH, True)])
    outputs += fold(watching, [taken(79, 2.0, arrival=902), taken(80, 3.0, arrival=902)])
    assert windows(outputs) == [(1, (1.0, 2.0))]


def test_a_tick_that_did_nothing_is_no_word_from_the_line() -> None:
    # The daemon journals no tick that did nothing: with it or without it, the same must come out.
    closed = []
    for ticks in ([], [tick(75)]):
        watching = engine(windowed(10 * SECOND))
        outage: list[Entry] = [
            Disconnected(START + 78 * TENTH),
            Connected(START + 500 * TENTH, True),
        ]
        fold(watching, [taken(70), *ticks, *outage])
        closed.append(watching.next_deadline())
    assert closed == [START + 520 * TENTH] * 2


# Against the reference


class Step(NamedTuple):
    """An entry to be: ``lag`` tenths of a second older than it arrives, by its gauge's clock."""

    kind: str
    passed: int
    head: int = 0
    lag: int = 0
    value: float = 0.0


class Owner(NamedTuple):
    name: str
    keys: tuple[str, ...]


class Given(NamedTuple):
    """An entry, and what the reference needs to know of it."""

    entry: Entry
    owner: Owner | None = None
    time: int = 0
    value: float = 0.0


def number_at(time: int) -> int:
    """Readings are numbered by their time, so that two of one time are one."""
    return (time - START) // TENTH + 10_000


def numbered(owner: Owner) -> bool:
    return owner.name == "weight"


SKEW = {1: 0, 2: -400 * TENTH, 3: 290 * SECOND}


def given_steps(steps: Sequence[Step]) -> list[Given]:
    now, entries = START, []
    for kind, passed, head, lag, value in steps:
        now += passed * TENTH
        if kind == "glue":
            entry: Entry = Message(now, UNTIMED.topic, repr(value).encode())
            entries.append(Given(entry, Owner("glue", ()), now, value))
            continue
        if kind in ("weight", "torque"):
            time = now + SKEW[head] - lag * TENTH
            source = HEADS if kind == "weight" else UNNUMBERED
            number = number_at(time)
            document = {"v": value, "t": time / SECOND, "n": number, "head": head}
            entry = Message(now, source.topic, orjson.dumps(document))
            entries.append(Given(entry, Owner(kind, (str(head),)), time, value))
            continue
        make: dict[str, Callable[[int], Entry]] = {
            "started": Started,
            "disconnected": Disconnected,
            "connected": lambda at: Connected(at, session_present=True),
            "tick": Tick,
            "noise": lambda at: Message(at, "elsewhere", b"0"),
        }
        entries.append(Given(make[kind](now)))
    return entries


@dataclass
class Series:
    """One stream as the reference knows it."""

    open: list[tuple[int, float]]
    accepted: list[int]
    over: int = -(2**63)
    due: int = 0


class Reference:
    """What must come out: (owner, values, first, last, number of the last) of a window, or
    (characteristic, reason)."""

    def __init__(self, plans: Sequence[CharacteristicPlan]) -> None:
        self.plans = {plan.name: plan.subgroup for plan in plans}
        self.series: dict[Owner, Series] = {}
        self.outages: list[tuple[int, int]] = []
        self.blind_from: int | None = None
        self.heard = 0
        self.abandoned = 0

    def watched(self, time: int) -> int:
        seen = time if self.blind_from is None else self.blind_from
        return seen - sum(end - start for start, end in self.outages)

    def next_due(self) -> int | None:
        """The arrival of the next deadline; None while none can come."""
        waiting = [s.due for s in self.series.values() if s.open]
        if not waiting or self.blind_from is not None:
            return None
        return min(waiting) + sum(end - start for start, end in self.outages)

    def take(self, given: Given) -> list[tuple[object, ...]]:
        entry, owner = given.entry, given.owner
        if isinstance(entry, Started | Disconnected):
            if self.blind_from is None:
                self.blind_from = self.heard
            return []
        found = self.close_due(entry.time)
        if isinstance(entry, Tick):
            return found
        self.heard = entry.time
        if isinstance(entry, Connected):
            if self.blind_from is not None:
                self.outages.append((self.blind_from, entry.time))
                self.blind_from = None
        elif owner is None:
            found.append((None, "no-topic"))
        else:
            found += self.read(owner, given.time, given.value, entry.time)
        return found

    def close_due(self, now: int) -> list[tuple[object, ...]]:
        found = []
        due = [(s.due, owner) for owner, s in self.series.items() if s.open]
        for at, owner in sorted(due):
            if at <= self.watched(now):
                series = self.series[owner]
                series.over = self.end(owner, series.open[0][0])
                found += self.close(owner, series)
        return found

    def read(self, owner: Owner, time: int, value: float, now: int) -> list[tuple[object, ...]]:
        series = self.series.setdefault(owner, Series([], []))
        timed = owner.name != "glue"
        if timed and time in series.accepted:
            return [(owner.name, "repeated")]
        if timed and time < max([series.over, *series.accepted]):
            return [(owner.name, "late")]
        found: list[tuple[object, ...]] = []
        if series.open and time >= self.end(owner, series.open[0][0]):
            found = self.close(owner, series)
        series.accepted.append(time)
        series.open.append((time, value))
        series.due = self.watched(now) + self.end(owner, time) - time + GRACE
        return found

    def end(self, owner: Owner, time: int) -> int:
        plan = self.plans[owner.name]
        assert isinstance(plan, ByWindow)
        return (time // plan.window + 1) * plan.window

    def close(self, owner: Owner, series: Series) -> list[tuple[object, ...]]:
        plan = self.plans[owner.name]
        assert isinstance(plan, ByWindow)
        gathered, series.open = series.open, []
        if len(gathered) < plan.min_size:
            self.abandoned += 1
            return []
        values = tuple(value for _, value in gathered)
        last = gathered[-1][0]
        return [(owner, values, gathered[0][0], last, number_at(last) if numbered(owner) else None)]


PLANS = (
    windowed(7 * SECOND, 2),
    windowed(10 * SECOND, name="torque", source=UNNUMBERED),
    windowed(5 * SECOND, name="glue", source=UNTIMED),
)

passed = st.sampled_from([0, 0, 1, 1, 2, 5, 9, 10, 13, 35, 70, 110])
read_steps = st.one_of(
    st.builds(
        Step,
        st.sampled_from(["weight", "weight", "torque"]),
        passed,
        st.integers(1, 3),
        st.sampled_from([0, 0, 0, 1, 3, 12, 30, 80]),
        st.floats(-3, 3, width=16),
    ),
    st.builds(Step, st.just("glue"), passed, value=st.floats(-3, 3, width=16)),
    st.builds(Step, st.just("noise"), passed),
)
outage_steps = st.builds(
    Step, st.sampled_from(["disconnected", "started", "connected", "connected"]), passed
)
tick_steps = st.builds(Step, st.just("tick"), passed)

undisturbed = st.lists(read_steps, max_size=40)
disturbed = st.lists(st.one_of(read_steps, read_steps, outage_steps), max_size=50)
ticked = st.lists(st.one_of(read_steps, read_steps, outage_steps, tick_steps), max_size=50)


def seen_of(outputs: Sequence[Output]) -> list[tuple[object, ...]]:
    """Outputs as the reference gives them."""
    found: list[tuple[object, ...]] = []
    for output in outputs:
        if isinstance(output, Points):
            subgroup = output.subgroup
            owner = Owner(output.characteristic.name, tuple(v for _, v in output.stream))
            number, time, *_ = subgroup.identity
            assert time == (None if owner.name == "glue" else subgroup.last)
            found.append((owner, subgroup.values, subgroup.first, subgroup.last, number))
        elif isinstance(output, SetAside):
            found.append((output.characteristic, output.reason))
    return found


@settings(max_examples=400, deadline=None)
@given(ticked)
def test_windows_are_those_of_the_reference_and_come_when_it_says(steps: list[Step]) -> None:
    watching, reference = engine(*PLANS), Reference(PLANS)
    for given_entry in given_steps(steps):
        assert seen_of(watching.fold(given_entry.entry)) == reference.take(given_entry)
        due, look = reference.next_due(), watching.next_deadline()
        assert due is None or (look is not None and look <= due)
    assert watching.counts.abandoned == reference.abandoned


# Ticks change nothing but when


def plain(outputs: Sequence[Output]) -> list[object]:
    """Outputs as they are seen from outside: an alert by its bytes."""
    return [messages.encode(o.event) if isinstance(o, Alert) else o for o in outputs]


def whole_state(watching: Engine) -> object:
    streams = [state.state() for state in watching.streams()]
    return orjson.loads(orjson.dumps([watching.state(), streams], option=orjson.OPT_SORT_KEYS))


def standings(watching: Engine) -> list[object]:
    return [{**watching.standing(state), "time": None} for state in watching.streams()]


def with_ticks(entries: Sequence[Given], places: Sequence[tuple[int, float]]) -> list[Entry]:
    """Ticks among the entries; none that closes a window between the last message and an outage,
    since whether one came then is a fact of the line: to be journaled, not to be invented."""
    reference = Reference(PLANS)
    ticked: list[Entry] = []
    for index, each in enumerate(entries):
        before = entries[index - 1].entry.time if index else START
        for part in sorted(part for place, part in places if place % len(entries) == index):
            at = before + round((each.entry.time - before) * part)
            due = reference.next_due()
            if not isinstance(each.entry, Started | Disconnected) or due is None or at < due:
                reference.take(Given(Tick(at)))
                ticked.append(Tick(at))
        reference.take(each)
        ticked.append(each.entry)
    times = [entry.time for entry in ticked]
    assert times == sorted(times)
    return ticked


tick_places = st.lists(st.tuples(st.integers(0, 49), st.floats(0, 1)), max_size=12)


@settings(max_examples=400, deadline=None)
@given(st.one_of(undisturbed, disturbed), tick_places)
def test_ticks_change_nothing_but_when_points_appear(
    steps: list[Step], places: list[tuple[int, float]]
) -> None:
    entries = given_steps(steps)
    far = Tick(START + 10_000 * SECOND)  # what is open is closed, so that it can be compared
    alone, among = engine(*PLANS), engine(*PLANS)
    expected = fold(alone, [*(each.entry for each in entries), far])
    outputs = fold(among, [*with_ticks(entries, places), far])
    assert plain(outputs) == plain(expected)
    assert whole_state(among) == whole_state(alone)
    assert standings(among) == standings(alone)


@settings(max_examples=300, deadline=None)
@given(disturbed, st.lists(st.integers(1, 30), min_size=1, max_size=20))
def test_what_a_daemon_did_is_what_its_journal_gives(steps: list[Step], naps: list[int]) -> None:
    """A daemon wakes now and then, ticks, and journals the ticks that did something."""
    live = engine(*PLANS)
    journal: list[Entry] = []
    came: list[tuple[int, list[object]]] = []
    now, woken = START, 0
    for given_entry in given_steps(steps):
        while (now := now + naps[woken % len(naps)] * TENTH + 1) < given_entry.entry.time:
            woken += 1
            live.touched.clear()
            outputs = live.fold(Tick(now))
            if live.touched:
                journal.append(Tick(now))
                came.append((now, plain(outputs)))
            else:
                assert list(outputs) == []
        now = given_entry.entry.time
        journal.append(given_entry.entry)
        came.append((now, plain(live.fold(given_entry.entry))))
    replayed = engine(*PLANS)
    assert [(entry.time, plain(replayed.fold(entry))) for entry in journal] == came
    assert whole_state(replayed) == whole_state(live)
