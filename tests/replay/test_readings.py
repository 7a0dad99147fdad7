"""Readings as arrays: those that the engine accepts, in its order, with what it set aside."""

from __future__ import annotations

import hashlib
import json
from dataclasses import replace
from pathlib import Path

import journals
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from plans import GAUGE, START, characteristic, fold, points

from monitor.commandline import CommandError
from monitor.engine import Engine
from monitor.history import taken
from monitor.plan import ByCount, ByWindow, CharacteristicPlan, Plan, SubgroupPlan
from monitor.recording_lines import write_jsonl
from monitor.times import SECOND
from replay.readings import Gathered, gather, sha256
from replay.recordings import Recording
from replay.subgrouping import subgroups
from replay.tables import Layout

HEADS = replace(GAUGE, stream=(("head", ("head",)),), plausible_lower=0.0, plausible_upper=1e3)

Step = tuple[int, int, int, object, int]
"""Seconds since the message before, delay, counter, value, head."""

STEPS = st.lists(
    st.tuples(
        st.sampled_from([0, 1, 1, 2, 3, 40]),
        st.sampled_from([0, 0, 0, 2, 90, -600]),
        st.sampled_from([1, 1, 1, 1, 2, 0, -1, -5000]),
        st.sampled_from([340.0, 341.5, 339, "340.25", "none", None, -5.0]),
        st.integers(1, 3),
    ),
    max_size=60,
)


def lines(steps: list[Step]) -> str:
    second, number, written = 0, 6000, []
    for later, delay, on, value, head in steps:
        second, number = second + later, max(0, number + on)
        document = {"v": value, "t": (START // SECOND) + second - delay, "n": number, "head": head}
        moment = START / SECOND + second
        written.append(json.dumps({"time": moment, "topic": GAUGE.topic, "payload": document}))
    return "".join(line + "\n" for line in written)


def read(plan: CharacteristicPlan, *paths: Path) -> Gathered:
    recordings = [Recording(str(path)) for path in paths]
    return gather(Plan((plan,)), recordings, Layout((), {}, None), SECOND, lambda _: None)


@pytest.mark.parametrize(
    "subgroup",
    [
        ByCount(1),
        ByCount(3, max_gap=10 * SECOND),
        ByCount(2, every=20 * SECOND),
        ByWindow(30 * SECOND, 2),
    ],
    ids=str,
)
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=60)
@given(steps=STEPS)
def test_they_make_the_subgroups_that_the_engine_makes(
    tmp_path: Path, subgroup: SubgroupPlan, steps: list[Step]
) -> None:
    plan = replace(characteristic(source=HEADS), subgroup=subgroup)
    recording = tmp_path / "r.jsonl"
    recording.write_text(lines(steps))
    engine = Engine(Plan((plan,)), points=True)
    expected: dict[object, list[tuple[int, int, float]]] = {}
    opened = Recording(str(recording)).open(Layout((), {}, None), iter(()), lambda *_: None)
    for chunk in opened.chunks:
        for entry in chunk.entries:
            assert entry is not None
            for point in points(engine.fold(entry)):  # type: ignore[arg-type]
                made = point.subgroup
                expected.setdefault(point.stream, []).append((made.last, made.size, made.mean))

    gathered = read(plan, recording)

    (readings,) = gathered.readings.values()
    assert readings.count == engine.counts.readings
    assert readings.set_aside == engine.counts.set_aside
    assert gathered.entries == len(steps)
    for each in readings.streams:
        found = subgroups(subgroup, each)
        triples = zip(
            found.last.tolist(),
            found.statistics.n.tolist(),
            found.statistics.mean.tolist(),
            strict=True,
        )
        ours = [(last, n, pytest.approx(mean)) for last, n, mean in triples]
        theirs = expected.pop(each.stream, [])
        # A window may have closed at its time, with no reading of its stream after it.
        assert theirs[: len(ours)] == ours
        assert len(theirs) - len(ours) <= isinstance(subgroup, ByWindow)
    assert not expected


def test_times_values_and_restarts(tmp_path: Path) -> None:
    recording = tmp_path / "r.jsonl"
    recording.write_text(lines([(1, 0, 1, 340.0, 1), (1, 0, 1, 341.0, 1), (1, 0, -6000, 342.0, 1)]))
    (readings,) = read(characteristic(source=HEADS), recording).readings.values()
    (stream,) = readings.streams

    assert stream.stream == (("head", "1"),)
    assert (stream.time - START).tolist() == [SECOND, 2 * SECOND, 3 * SECOND]
    assert stream.value.tolist() == [340.0, 341.0, 342.0]
    assert stream.breaks.tolist() == [2]
    assert (readings.first, readings.last) == (START + SECOND, START + 3 * SECOND)


def test_other_characteristics_and_broken_lines_do_no_harm(tmp_path: Path) -> None:
    recording = tmp_path / "r.jsonl"
    recording.write_text(
        lines([(1, 0, 1, 340.0, 1)])
        + '{"time": 1, "topic": "other", "payload": 1}\nno line\n'
        + lines([(0, 0, 1, 340.0, 1)])
    )
    gathered = read(characteristic(source=HEADS), recording)

    assert gathered.unreadable == 1
    assert gathered.unreadable_at[0].startswith(f"{recording}:3: ")
    assert gathered.readings["weight"].set_aside == {"repeated": 1}


def test_several_recordings_are_one_stream(tmp_path: Path) -> None:
    whole = lines([(1, 0, 1, 340.0 + i, 1) for i in range(6)]).splitlines(keepends=True)
    (tmp_path / "a.jsonl").write_text("".join(whole[::2]))
    (tmp_path / "b.jsonl").write_text("".join(whole[1::2]))
    gathered = read(characteristic(source=HEADS), tmp_path / "a.jsonl", tmp_path / "b.jsonl")

    (stream,) = gathered.readings["weight"].streams
    assert stream.value.tolist() == [340.0 + i for i in range(6)]


def test_a_characteristic_without_readings_has_no_streams(tmp_path: Path) -> None:
    (tmp_path / "r.jsonl").write_text("")
    readings = read(characteristic(), tmp_path / "r.jsonl").readings["weight"]

    assert (readings.streams, readings.count, readings.first, readings.last) == ((), 0, None, None)


def test_a_file_is_known_by_its_sha256(tmp_path: Path) -> None:
    (tmp_path / "r.jsonl").write_bytes(b"abc")

    # FIPS 180-4's first example.
    assert sha256(str(tmp_path / "r.jsonl")) == hashlib.sha256(b"abc").hexdigest()
    assert sha256(str(tmp_path / "r.jsonl")).startswith("ba7816bf8f01cfea")
    with pytest.raises(CommandError, match="no regular file"):
        sha256(str(tmp_path))


def test_a_part_is_read_as_it_was_taken_live(tmp_path: Path) -> None:
    """What the engine of then knew (repeats, marks, streams) counts from the first line on."""
    day = journals.day(seed=1)
    half = len(day) // 2
    engine = Engine(Plan(()), points=False)
    fold(engine, day[:half])
    for name, recorded in (
        ("whole.jsonl", day),
        ("first.jsonl", day[:half]),
        ("rest.jsonl", [taken(engine), *day[half:]]),
    ):
        with (tmp_path / name).open("wb") as file:
            write_jsonl(file, recorded)

    def gathered(*names: str) -> Gathered:
        recordings = [Recording(str(tmp_path / name)) for name in names]
        return gather(journals.PLAN, recordings, Layout((), {}, None), SECOND, lambda _: None)

    whole, first, rest = (gathered(f"{name}.jsonl") for name in ("whole", "first", "rest"))
    for name, readings in whole.readings.items():
        parts = first.readings[name], rest.readings[name]
        assert sum(part.count for part in parts) == readings.count
        for each in readings.streams:
            values = [s.value for part in parts for s in part.streams if s.stream == each.stream]
            assert np.concatenate(values).tolist() == each.value.tolist()
    # A state in the middle is passed over, and said.
    assert "passed over" in gathered("first.jsonl", "rest.jsonl").notes[0]
