"""What will bite: one configuration at a time, beside its neighbour that is left in peace."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from monitor.configuration.pitfalls import Pitfall, pitfalls
from monitor.configuration.resolve import read_plan

Warn = Callable[..., list[Pitfall]]

QUIET = [{"kind": "shewhart", "name": "quiet", "width": 6}]


@pytest.fixture
def warn(tmp_path: Path) -> Warn:
    """Pitfalls of a characteristic ``w`` with these keys; ``source`` adds to its source."""

    def make(source: dict[str, Any] | None = None, **keys: Any) -> list[Pitfall]:
        section = {
            "unit": "g",
            "source": {"topic": "a/b", "payload": "json", "value": "/v", **(source or {})},
            "baseline": {"mean": 340, "sigma": 2},
            "detectors": QUIET,
        } | keys
        path = tmp_path / "line.yaml"
        path.write_text(json.dumps({"version": 1, "characteristics": {"w": section}}))
        return pitfalls(read_plan(path, {}))

    return make


def one(found: list[Pitfall]) -> tuple[str, str, str]:
    """The only pitfall, its key below the characteristic."""
    (pitfall,) = found
    return pitfall.key.removeprefix("characteristics.w."), pitfall.wrong, pitfall.instead


def test_nothing_bites(warn: Warn) -> None:
    assert warn() == []


@pytest.mark.parametrize(
    ("topic", "gap", "said"),
    [
        # six a minute: ten seconds from reading to reading
        (
            "a",
            "5s",
            "is not longer than the usual 10 s between readings: nearly every subgroup is g",
        ),
        ("a", "10s", "is not longer than the usual 10 s"),
        (
            "a",
            "15s",
            "is less than twice the usual 10 s between readings: one that is missing gives",
        ),
        ("a", "20s", None),
        # nobody writes a stream key for a single stream
        (
            "{a}",
            "20s",
            "is not longer than the usual 20 s between readings of one stream, if there are 2",
        ),
        ("{a}", "40s", None),
        (
            "{a}/{b}",
            "60s",
            "is less than twice the usual 40 s between readings of one stream, if there are 4",
        ),
        ("{a}/{b}", "80s", None),
    ],
)
def test_max_gap(warn: Warn, topic: str, gap: str, said: str | None) -> None:
    source = {"topic": topic, "expected_rate": "6/min"}
    found = warn(source, subgroup={"size": 5, "max_gap": gap})
    if said is None:
        assert found == []
    else:
        key, wrong, instead = one(found)
        assert key == "subgroup.max_gap"
        assert wrong.startswith(said)
        assert "or leave max_gap out" in instead


def test_max_gap_of_streams_that_are_named(warn: Warn) -> None:
    own = {f"a={i}": {"mean": 1, "sigma": 1} for i in range(6)}
    source = {"topic": "{a}", "expected_rate": "6/min"}
    found = warn(source, subgroup={"size": 5, "max_gap": "60s"}, baseline={"by_stream": own})
    _, wrong, instead = one(found)
    assert wrong.startswith("is not longer than the usual 60 s between readings of one stream, if")
    assert instead == "write 3 min or more, or leave max_gap out"


def test_max_gap_matters_to_moving_ranges_but_not_to_single_readings(warn: Warn) -> None:
    source, subgroup = {"expected_rate": "6/min"}, {"size": 1, "max_gap": "5s"}
    assert warn(source, subgroup=subgroup) == []
    ranges = [{"kind": "shewhart", "chart": "moving_range", "width": 9}]
    assert "moving range is left blank" in one(warn(source, subgroup=subgroup, detectors=ranges))[1]
    subgroup["max_gap"] = "15s"
    found = one(warn(source, subgroup=subgroup, detectors=ranges))
    assert "missing leaves a moving range blank" in found[1]


def test_max_gap_without_a_rate(warn: Warn) -> None:
    assert warn(subgroup={"size": 5, "max_gap": "1s"}) == []


@pytest.mark.parametrize(
    ("plausible", "baseline", "key", "said"),
    [
        ({"lower": 332, "upper": 348}, {}, None, ""),  # four standard deviations
        ({"lower": 333}, {}, "lower", "lies 3.5 standard deviations from the mean"),
        ({"upper": 346}, {}, "upper", "lies 3 standard deviations from the mean"),
        # readings spread by sigma_between as well: √(2² + 2²) = 2.83
        ({"upper": 350}, {"sigma_between": 2}, "upper", "lies 3.5 standard deviations"),
        ({"lower": 341}, {}, "lower", "lies on the wrong side of the mean: most readings"),
    ],
)
def test_plausible(
    warn: Warn, plausible: object, baseline: dict[str, float], key: str | None, said: str
) -> None:
    found = warn({"plausible": plausible}, baseline={"mean": 340, "sigma": 2, **baseline})
    if key is None:
        assert found == []
    else:
        assert one(found)[0] == f"source.plausible.{key}"
        assert one(found)[1].startswith(said)


def test_plausible_tells_where_to_put_it(warn: Warn) -> None:
    assert "324 g or beyond" in one(warn({"plausible": {"lower": 335}}))[2]


def test_plausible_for_the_stream_it_hurts_most(warn: Warn) -> None:
    own = {f"a={i}": {"mean": 340 + i, "sigma": 1} for i in range(5)}
    found = warn(
        {"topic": "{a}", "plausible": {"upper": 347}},
        baseline={"mean": 330, "sigma": 1, "by_stream": own},
    )
    assert one(found)[1].startswith("lies 3 standard deviations from the mean of a=4")


def test_use_if_that_looks_at_the_reading(warn: Warn) -> None:
    assert one(warn({"use_if": {"/v": [339, 340, 341]}}))[0] == "source.use_if"
    assert warn({"use_if": {"/verdict": "accept"}}) == []  # nobody can know what it leaves out


@pytest.mark.parametrize(("resolution", "bites"), [(0.1, False), (1, False), (1.1, True)])
def test_resolution(warn: Warn, resolution: float, bites: bool) -> None:
    found = warn(resolution=resolution)
    assert [each.key for each in found] == ["characteristics.w.resolution"][:bites]
    assert all("half of sigma (2 g)" in each.wrong for each in found)


def test_resolution_of_the_stream_with_the_least_spread(warn: Warn) -> None:
    own = {"a=1": {"mean": 1, "sigma": 2}, "a=2": {"mean": 1, "sigma": 0.5}}
    found = warn({"topic": "{a}"}, baseline={"by_stream": own}, resolution=0.3)
    assert "half of sigma (0.5 g)" in one(found)[1]


@pytest.mark.parametrize(
    ("topic", "rate", "bites"),
    [("a", "3/min", False), ("a", "2/min", True), ("{a}", "6/min", False), ("{a}", "5/min", True)],
)
def test_windows_that_hold_too_little(warn: Warn, topic: str, rate: str, bites: bool) -> None:
    found = warn({"topic": topic, "expected_rate": rate}, subgroup={"window": "60s", "min_size": 3})
    assert [each.key for each in found] == ["characteristics.w.subgroup.min_size"][:bites]


@pytest.mark.parametrize(
    ("detector", "instead"),
    [
        ({"kind": "shewhart"}, "write a larger width"),
        ({"kind": "cusum", "k": 0.5, "h": 4}, "write a larger h"),
        ({"kind": "ewma", "lambda": 0.2}, "write a larger width"),
        ({"kind": "shewhart", "chart": "moving_range"}, "write a larger width"),
        ({"kind": "shewhart", "rules": "western-electric-1956"}, "its rule run rings most"),
    ],
)
def test_a_detector_that_rings_too_often(
    warn: Warn, detector: dict[str, object], instead: str
) -> None:
    found = warn({"expected_rate": "60/min"}, detectors=[*QUIET, detector])
    key, wrong, to_do = one(found)
    assert key == "detectors[1]"
    assert wrong.startswith(f"({detector['kind']}")
    assert "rings with nothing wrong once in" in wrong
    assert to_do.startswith(instead)


def test_how_often_is_said(warn: Warn) -> None:
    """Common practice: three sigma is one in 370; at one a second that is six minutes."""
    found = warn({"expected_rate": "60/min"}, detectors=[{"kind": "shewhart"}])
    assert one(found)[1] == "(shewhart) rings with nothing wrong once in 6.2 min, 78 times in 8 h"


def test_once_in_a_shift_is_in_peace(warn: Warn) -> None:
    """370.4 subgroups in a little more or less than eight hours: 77.2 s or 78.3 s each."""
    shewhart = [{"kind": "shewhart"}]
    assert warn({"expected_rate": "1000/d"}, detectors=shewhart) == []
    assert one(warn({"expected_rate": "1150/d"}, detectors=shewhart))[0] == "detectors[0]"


def test_many_that_ring_seldom_ring_often(warn: Warn) -> None:
    detectors = [{"kind": "shewhart", "name": f"s{i}"} for i in range(3)]
    (found,) = warn({"expected_rate": "1000/d"}, detectors=detectors)
    assert found.key == "characteristics"
    assert found.wrong == "ring 2.7 times in 8 h with nothing wrong, all together"


def test_in_each_stream_where_nobody_knows_how_many(warn: Warn) -> None:
    found = warn({"topic": "{a}"}, subgroup={"window": "10s"}, detectors=[{"kind": "shewhart"}])
    assert "once in 62 min in each stream, 7.8 times in 8 h" in one(found)[1]


def test_it_reads_as_a_sentence(warn: Warn) -> None:
    (found,) = warn(resolution=3)
    assert str(found).startswith("characteristics.w.resolution is coarser than half of sigma (2 g)")
