"""The simulated line: what a scene promises is in its messages, and nothing else is."""

from __future__ import annotations

import json
from collections import Counter, defaultdict
from itertools import islice, pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.demo import line
from monitor.demo.scenes import SCENES
from monitor.entries import Message
from monitor.times import SECOND, parse_iso_time

CHECKWEIGHER = "plant/jar-line-2/checkweigher/1/reading"
TORQUE = "plant/jar-line-2/capper/torque"
HEADS = range(1, 7)


def weighings(name: str, seed: int = 1, **options: float) -> list[dict[str, object]]:
    """The checkweigher's payloads."""
    messages = line.messages(SCENES[name], seed, **options)
    return [json.loads(m.payload) for m in messages if m.topic == CHECKWEIGHER]


def by_head(name: str, seed: int = 1, **options: float) -> dict[int, np.ndarray]:
    """Net weights of each head."""
    nets: dict[int, list[float]] = defaultdict(list)
    for weighing in weighings(name, seed, **options):
        nets[weighing["head"]].append(weighing["net"])
    return {head: np.array(values) for head, values in nets.items()}


def torques(name: str, seed: int = 1) -> np.ndarray:
    return np.array(
        [float(m.payload) for m in line.messages(SCENES[name], seed) if m.topic == TORQUE]
    )


@pytest.mark.parametrize("name", SCENES)
def test_same_seed_same_bytes(name: str) -> None:
    first, second, other = (
        list(line.messages(SCENES[name], seed, seconds=700)) for seed in (7, 7, 8)
    )
    assert first == second
    assert first != other


@settings(max_examples=30, deadline=None)
@given(
    st.sampled_from(sorted(SCENES)),
    st.integers(0, 2**32),
    st.integers(1, 120),
    st.integers(0, 10**15),
)
def test_arrivals_never_run_backwards_and_no_reading_is_from_the_future(
    name: str, seed: int, seconds: int, start: int
) -> None:
    messages = list(line.messages(SCENES[name], seed, start=start, seconds=seconds))
    assert messages[0].time >= start
    assert all(a.time <= b.time for a, b in pairwise(messages))
    assert messages[-1].time < start + seconds * SECOND
    for message in messages:
        if message.topic != TORQUE:
            assert parse_iso_time(json.loads(message.payload)["t"]) <= message.time


@pytest.mark.parametrize("name", SCENES)
def test_a_longer_run_begins_with_a_shorter_one(name: str) -> None:
    short = list(line.messages(SCENES[name], 3, seconds=100))
    assert list(islice(line.messages(SCENES[name], 3, seconds=200), len(short))) == short


def test_heads_take_turns_and_share_one_counter() -> None:
    came = weighings("in-control", seconds=60)
    assert [w["n"] for w in came] == list(range(1, 601))
    assert [w["head"] for w in came] == [*HEADS] * 100
    assert Counter(m.topic for m in line.messages(SCENES["in-control"], 1, seconds=60)) == {
        CHECKWEIGHER: 600,
        TORQUE: 60,
        "plant/jar-line-2/labeller/glue": 12,
    }


def test_the_payloads_are_what_the_gauges_of_the_contract_send() -> None:
    weighing = next(m for m in line.messages(SCENES["demo"], 1, start=0) if m.topic == CHECKWEIGHER)
    assert weighing == Message(
        0,
        CHECKWEIGHER,
        b'{"t":"1970-01-01T00:00:00.000Z","n":1,"head":1,"net":340.0,"verdict":"accept"}',
    )


def test_weights_lie_on_the_scale_s_grid_and_are_rejected_outside_the_tolerance() -> None:
    came = weighings("spread-growth")
    assert all(w["net"] == round(w["net"], 1) for w in came)
    assert {(331.0 <= w["net"] <= 352.0, w["verdict"]) for w in came} == {
        (True, "accept"),
        (False, "reject"),
    }


def test_in_control_has_the_baseline_it_says() -> None:
    """Against the moments of the model; bounds are four standard errors of each estimate."""
    heads = by_head("in-control", seconds=2 * 3600)
    subgroups = np.array([nets.reshape(-1, 5) for nets in heads.values()])
    count = subgroups.shape[0] * subgroups.shape[1]
    normal = line.BASELINES[line.NET_WEIGHT]
    grid = 0.1**2 / 12
    within = subgroups.var(axis=-1, ddof=1).mean()
    assert within == pytest.approx(normal.sigma**2 + grid, rel=4 * np.sqrt(2 / (4 * count)))
    means = subgroups.mean(axis=-1)
    of_means = normal.between**2 + (normal.sigma**2 + grid) / 5
    assert means.var() == pytest.approx(of_means, rel=4 * np.sqrt(2 / count))
    assert means.mean() == pytest.approx(normal.mean, abs=4 * np.sqrt(of_means / count))
    assert lag_one(means) == pytest.approx(0.0, abs=4 / np.sqrt(count))

    torque = torques("in-control")
    assert torque.mean() == pytest.approx(2.05, abs=4 * 0.11 / np.sqrt(torque.size))
    assert torque.std() == pytest.approx(0.11, rel=4 / np.sqrt(2 * torque.size))


def lag_one(means: np.ndarray) -> float:
    """Autocorrelation at lag 1 over all heads; ``means`` is (heads, subgroups)."""
    centred = means - means.mean(axis=-1, keepdims=True)
    return float((centred[:, 1:] * centred[:, :-1]).sum() / (centred**2).sum())


def test_autocorrelated_means_wander_as_the_scene_says() -> None:
    heads = by_head("autocorrelated", seconds=2 * 3600)
    means = np.array([nets.reshape(-1, 5).mean(axis=-1) for nets in heads.values()])
    wander = SCENES["autocorrelated"].wander
    assert wander is not None
    normal = line.BASELINES[line.NET_WEIGHT]
    noise = normal.between**2 + normal.sigma**2 / 5
    expected = wander.phi * wander.sd**2 / (wander.sd**2 + noise)
    assert lag_one(means) == pytest.approx(expected, abs=4 / np.sqrt(means.size))


@pytest.mark.parametrize("name", ["head-drift", "all-heads-step", "demo"])
def test_a_shift_is_on_its_heads_only_and_of_its_size(name: str) -> None:
    (cause,) = (c for c in SCENES[name].causes if c.characteristic == "net-weight")
    seconds = SCENES[name].seconds
    calm = by_head("in-control", seconds=seconds)
    seen = {number: set[float]() for number in HEADS}
    for weighing in {w["n"]: w for w in weighings(name)}.values():
        number, head = weighing["n"] - 1, weighing["head"]
        moved = weighing["net"] - calm[head][number // 6]
        elapsed = number * 0.1
        expected = cause.size * cause.grown(elapsed) if cause.head in (None, head) else 0.0
        assert moved == pytest.approx(expected, abs=0.1 + 1e-9)  # both are rounded to 0.1 g
        seen[head].add(round(moved, 1))
    hit = [head for head in HEADS if cause.size in seen[head]]
    assert hit == ([*HEADS] if cause.head is None else [cause.head])


def test_spread_grows_on_its_head_without_moving_its_centre() -> None:
    (cause,) = SCENES["spread-growth"].causes
    calm = by_head("in-control", seconds=3600)
    heads = by_head("spread-growth", seconds=3600)
    grown = round((cause.onset + cause.growth) / 0.6)
    for head in HEADS:
        if head == cause.head:
            wide = heads[head][grown:].reshape(-1, 5)
            within = np.sqrt(wide.var(axis=-1, ddof=1).mean())
            assert within == pytest.approx(2 * 1.9, rel=4 / np.sqrt(2 * wide.size))
            assert wide.mean() == pytest.approx(341.2, abs=4 * 3.8 / np.sqrt(wide.size))
        else:
            assert (heads[head] == calm[head]).all()


@pytest.mark.parametrize("name", ["torque-loosening", "demo"])
def test_torque_falls_by_its_size(name: str) -> None:
    (cause,) = (c for c in SCENES[name].causes if c.characteristic == "cap-torque")
    loose = torques(name)
    moved = loose - torques("in-control")[: loose.size]
    expected = [cause.size * cause.grown(second) for second in range(loose.size)]
    assert moved == pytest.approx(np.array(expected), abs=0.001 + 1e-9)
    assert moved[-1] == pytest.approx(-0.15)


def test_the_gateway_repeats_reorders_and_loses_only_what_the_checkweigher_sent() -> None:
    scene = SCENES["gateway"]
    sent = list(line.messages(SCENES["in-control"], 1))
    came = list(line.messages(scene, 1))
    assert [m for m in came if m.topic != CHECKWEIGHER] == [
        m for m in sent if m.topic != CHECKWEIGHER
    ]
    counts = Counter(m.payload for m in came if m.topic == CHECKWEIGHER)
    assert counts.keys() < {m.payload for m in sent}
    assert set(counts.values()) == {1, 2}
    numbers = [w["n"] for w in weighings("gateway")]
    behind = Counter()
    for index, number in enumerate(numbers):
        overtaken = sum(1 for other in numbers[max(0, index - 30) : index] if other > number)
        behind[overtaken] += 1
    late, swapped = (sum(behind[n] for n in span) for span in (range(6, 30), range(1, 6)))
    assert late > 20
    assert swapped > 20
    for begin, length in scene.gateway.outages:
        silent = range(round(begin * 10) + 1, round((begin + length) * 10) + 1)
        assert not set(silent) & set(numbers)
        assert begin * 10 in numbers or begin * 10 - 1 in numbers
