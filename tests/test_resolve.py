"""From a configuration to a plan: defaults, and what changes a decision revision."""

from __future__ import annotations

import copy
import hashlib
import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor.configuration.presets import PRESETS, preset
from monitor.configuration.resolve import read_settings
from monitor.plan import (
    BaselinePlan,
    ByCount,
    ByDirection,
    ByWindow,
    CharacteristicPlan,
    CusumPlan,
    DetectorPlan,
    EwmaPlan,
    Judgement,
    RetentionPlan,
    RulePlan,
    SequencePlan,
    Settings,
    ShewhartPlan,
    SourcePlan,
    Specification,
)
from monitor.times import DAY

WEIGHT: dict[str, Any] = {
    "title": "Net weight",
    "unit": "g",
    "specification": {"nominal": 340, "lower": 331},
    "source": {
        "topic": "plant/{lane}/scale/+/{cell}",
        "payload": "json",
        "value": "/a~1b/0",
        "time": "/t",
        "sequence": {"value": "/n", "wraps": 65536},
        "stream": {"head": "/head"},
        "use_if": {"/ok": True, "/verdict": ["accept", 4, None]},
        "plausible": {"upper": 1000},
        "expected_rate": "600/min",
    },
    "subgroup": {"size": 5, "max_gap": "30s"},
    "baseline": {"mean": 341.2, "sigma": 1.9, "sigma_between": 0.4},
    "detectors": [
        {"kind": "shewhart"},
        {"kind": "shewhart", "chart": "range", "width": 3.5, "direction": "up"},
        {
            "kind": "cusum",
            "k": 0.5,
            "h": 5,
            "head_start": 0.5,
            "clip": 3,
            "after_signal": "hold",
            "direction": "down",
        },
        {"kind": "ewma", "name": "slow", "lambda": 0.1, "limits": "asymptotic"},
    ],
    "priority": {"down": "high"},
    "reaction": {"up": ["see {head}", "call"], "down": ["call", "stop"]},
}

GLUE: dict[str, Any] = {
    "source": {"topic": "plant/glue", "payload": "number"},
    "baseline": {"mean": 165, "sigma": 1.2},
    "detectors": [
        {"kind": "shewhart"},
        {"kind": "cusum", "k": 1, "h": 4},
        {"kind": "ewma", "lambda": 0.2},
    ],
}

BASE: dict[str, Any] = {
    "version": 1,
    "broker": {"host": "b"},
    "outputs": {"root": "plant/jar line/2"},
    "journal": {"path": "var/j.db"},
}

Read = Callable[..., Settings]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    """Settings with these characteristics; keywords replace top-level keys."""

    def make(**keys: Any) -> Settings:
        keys.setdefault("characteristics", {"weight": WEIGHT})
        path = tmp_path / "line.yaml"
        path.write_text(yaml.safe_dump(BASE | keys, sort_keys=False, allow_unicode=True))
        return read_settings(path, {})

    return make


def only(settings: Settings) -> CharacteristicPlan:
    (plan,) = settings.plan.characteristics
    return plan


def test_all_of_a_characteristic(read: Read) -> None:
    plan = only(read())
    anonymous = replace(
        plan,
        judgement=Judgement(
            replace(plan.judgement.baseline, revision=""),
            tuple(replace(each, revision="") for each in plan.judgement.detectors),
        ),
    )
    outside = RulePlan("outside", width=3.0)
    wide = RulePlan("outside", width=3.5)
    assert anonymous == CharacteristicPlan(
        name="weight",
        title="Net weight",
        unit="g",
        source=SourcePlan(
            topic="plant/+/scale/+/+",
            captures=((1, "lane"), (4, "cell")),
            payload="json",
            value=("a/b", "0"),
            time=("t",),
            sequence=SequencePlan(("n",), 65536),
            stream=(("head", ("head",)),),
            use_if=((("ok",), (True,)), (("verdict",), ("accept", 4, None))),
            plausible_upper=1000.0,
            expected_rate=10.0,
        ),
        subgroup=ByCount(5, 30_000_000),
        judgement=Judgement(
            BaselinePlan(341.2, 1.9, 0.4, ""),
            (
                DetectorPlan("shewhart", "shewhart", ShewhartPlan("mean", 3.0, (outside,)), ""),
                DetectorPlan(
                    "shewhart-range", "shewhart", ShewhartPlan("range", 3.5, (wide,), "up"), ""
                ),
                DetectorPlan(
                    "cusum", "cusum", CusumPlan("mean", 0.5, 5.0, 0.5, 3.0, True, "down"), ""
                ),
                DetectorPlan("slow", "ewma", EwmaPlan("mean", 0.1, 3.0, asymptotic=True), ""),
            ),
        ),
        priority=ByDirection("medium", "high", "high"),
        reaction=ByDirection(
            ("see {head}", "call"), ("call", "stop"), ("see {head}", "call", "stop")
        ),
        off_delay=120_000_000,
        rejoin=1_800_000_000,
        specification=Specification(340.0, 331.0, None),
    )


def test_defaults_of_a_characteristic(read: Read) -> None:
    plan = only(read(characteristics={"glue": GLUE}))
    assert (plan.title, plan.unit, plan.specification) == ("glue", "", None)
    assert plan.source == SourcePlan("plant/glue", (), "number")
    assert plan.subgroup == ByCount(1, None)
    assert [(each.name, each.scheme.chart) for each in plan.judgement.detectors] == [
        ("shewhart", "individual"),
        ("cusum", "individual"),
        ("ewma", "individual"),
    ]
    assert plan.judgement.detectors[1].scheme == CusumPlan("individual", 1.0, 4.0)
    assert plan.judgement.detectors[2].scheme == EwmaPlan("individual", 0.2, 3.0)
    assert plan.priority == ByDirection("medium", "medium", "medium")
    assert plan.reaction == ByDirection((), (), ())


def test_the_daemon(read: Read, tmp_path: Path) -> None:
    settings = read()
    broker = settings.broker
    assert (broker.host, broker.port, broker.keepalive) == ("b", 1883, 30)
    assert (broker.username, broker.password) == (None, None)
    assert broker.client_id == "driftbell-plant-jar-line-2"
    assert (settings.root, settings.points) == ("plant/jar line/2", True)
    assert settings.journal == str(tmp_path / "var/j.db")
    (tmp_path / "pw").write_text("hunter2\n")
    given = {"host": "b", "client_id": "x", "username": "m", "password_file": str(tmp_path / "pw")}
    settings = read(
        broker=given | {"port": 1884, "keepalive": "1min"},
        outputs={"root": "r", "points": False},
        journal={"path": "/srv/j.db"},
        alerts={"off_delay": "0s", "rejoin": "PT1H"},
    )
    broker = settings.broker
    assert (broker.client_id, broker.port, broker.keepalive) == ("x", 1884, 60)
    assert (broker.username, broker.password) == ("m", "hunter2")
    assert "hunter2" not in repr(settings)
    assert (settings.points, settings.journal) == (False, "/srv/j.db")
    assert (only(settings).off_delay, only(settings).rejoin) == (0, 3_600_000_000)


def test_how_long_the_journal_keeps_what(read: Read) -> None:
    assert read().retention == RetentionPlan(30 * DAY, 3 * 365 * DAY, 20_000_000_000)
    journal = {"path": "j.db", "keep": "7d", "max_size": "1.5 GB", "keep_alerts": "1y"}
    assert read(journal=journal).retention == RetentionPlan(7 * DAY, 365 * DAY, 1_500_000_000)


def test_resolution(read: Read) -> None:
    assert only(read()).resolution is None
    assert only(read(characteristics={"glue": GLUE | {"resolution": 0.1}})).resolution == 0.1


@pytest.mark.parametrize(
    ("given", "up", "down", "other"),
    [
        ("high", "high", "high", "high"),
        ({"up": "low"}, "low", "medium", "low"),
        ({"up": "low", "down": "medium"}, "low", "medium", "medium"),
        ({"down": "high", "up": "medium"}, "medium", "high", "high"),
        ({"other": "low"}, "medium", "medium", "low"),
        ({"up": "high", "other": "low"}, "high", "medium", "low"),
    ],
)
def test_priority(read: Read, given: object, up: str, down: str, other: str) -> None:
    plan = only(read(characteristics={"glue": GLUE | {"priority": given}}))
    assert plan.priority == ByDirection(up, down, other)


@pytest.mark.parametrize(
    ("given", "up", "down", "other"),
    [
        (["a", "b"], ("a", "b"), ("a", "b"), ("a", "b")),
        ({"up": ["a"]}, ("a",), (), ("a",)),
        ({"up": ["a"], "other": []}, ("a",), (), ()),
        ({"other": ["c"]}, (), (), ("c",)),
    ],
)
def test_reaction(read: Read, given: object, up: object, down: object, other: object) -> None:
    plan = only(read(characteristics={"glue": GLUE | {"reaction": given}}))
    assert plan.reaction == ByDirection(up, down, other)


@pytest.mark.parametrize(
    ("given", "plan"),
    [
        ({}, ByCount(1)),
        ({"size": 5}, ByCount(5)),
        ({"size": 5, "every": "60s"}, ByCount(5, None, 60_000_000)),
        ({"every": "60s", "max_gap": "5s"}, ByCount(1, 5_000_000, 60_000_000)),
        ({"window": "60s"}, ByWindow(60_000_000, 1)),
        ({"window": "1ms", "min_size": 3}, ByWindow(1_000, 3)),
    ],
)
def test_subgroups(read: Read, given: object, plan: object) -> None:
    assert only(read(characteristics={"glue": GLUE | {"subgroup": given}})).subgroup == plan


@pytest.mark.parametrize(
    ("subgroup", "chart"),
    [({"size": 1}, "individual"), ({"size": 2}, "mean"), ({"window": "1s"}, "mean")],
)
def test_what_is_charted(read: Read, subgroup: object, chart: str) -> None:
    plan = only(read(characteristics={"glue": GLUE | {"subgroup": subgroup}}))
    assert {each.scheme.chart for each in plan.judgement.detectors} == {chart}


@pytest.mark.parametrize("chart", ["mean", "median", "range", "sd"])
def test_charts(read: Read, chart: str) -> None:
    detectors = [{"kind": "shewhart", "chart": chart}]
    subgroup = {"window": "1s", "min_size": 2}
    plan = only(
        read(characteristics={"glue": GLUE | {"subgroup": subgroup, "detectors": detectors}})
    )
    (found,) = plan.judgement.detectors
    assert found.name == f"shewhart-{chart}"
    assert found.scheme == ShewhartPlan(chart, 3.0, (RulePlan("outside", width=3.0),))


def rules(read: Read, **detector: object) -> tuple[float, tuple[RulePlan, ...]]:
    plan = only(
        read(characteristics={"glue": GLUE | {"detectors": [{"kind": "shewhart"} | detector]}})
    )
    scheme = plan.judgement.detectors[0].scheme
    assert isinstance(scheme, ShewhartPlan)
    return scheme.width, scheme.rules


def test_rules(read: Read) -> None:
    zone = {"rule": "zone", "count": 2, "of": 3, "width": 2}
    zoned = RulePlan("zone", width=2.0, count=2, of=3)
    assert rules(read, rules=[zone, {"rule": "outside"}], width=2.5) == (
        2.5,
        (zoned, RulePlan("outside", width=2.5)),
    )
    assert rules(read, rules=[zone, "outside"]) == (3.0, (zoned, RulePlan("outside", width=3.0)))
    assert rules(read, rules=[{"rule": "outside", "width": 2}]) == (
        2.0,
        (RulePlan("outside", width=2.0),),
    )
    assert rules(read, rules=[{"rule": "outside", "width": 2}], width=4) == (
        4.0,
        (RulePlan("outside", width=2.0),),
    )
    patterns = [
        {"rule": "run", "length": 8},
        {"rule": "trend", "length": 6},
        {"rule": "alternation", "length": 14},
        {"rule": "stratification", "length": 15, "width": 1},
        {"rule": "mixture", "length": 8, "width": 1.5},
    ]
    assert rules(read, rules=patterns) == (3.0, tuple(RulePlan(**each) for each in patterns))


@pytest.mark.parametrize("name", PRESETS)
def test_presets_keep_their_inner_widths(read: Read, name: str) -> None:
    assert rules(read, rules=name, width=2) == (2.0, preset(name, 2.0))
    assert preset(name, 2.0)[0] == RulePlan("outside", width=2.0)
    assert preset(name, 2.0)[1:] == preset(name, 4.0)[1:]


def test_presets_are_those_of_the_sources() -> None:
    """From memory of the 1956 handbook and of Nelson's 1984 table, as commonly reprinted."""
    outside = RulePlan("outside", width=3.0)
    two_of_three = RulePlan("zone", count=2, of=3, width=2.0)
    four_of_five = RulePlan("zone", count=4, of=5, width=1.0)
    assert preset("outside-limits", 3.0) == (outside,)
    assert preset("western-electric-1956", 3.0) == (
        outside,
        two_of_three,
        four_of_five,
        RulePlan("run", length=8),
    )
    assert set(preset("nelson-1984", 3.0)) == {
        outside,
        RulePlan("run", length=9),
        RulePlan("trend", length=6),
        RulePlan("alternation", length=14),
        two_of_three,
        four_of_five,
        RulePlan("stratification", length=15, width=1.0),
        RulePlan("mixture", length=8, width=1.0),
    }


# ── decision revisions ───────────────────────────────────────────────────────────────────────────


def revisions(settings: Settings) -> tuple[str, ...]:
    plan = only(settings)
    return (plan.judgement.baseline.revision, *(each.revision for each in plan.judgement.detectors))


def edited(path: str, value: object, *, shewhart: bool = False) -> dict[str, Any]:
    """WEIGHT with the value at a dotted path replaced; with its first detector only."""
    changed = copy.deepcopy(WEIGHT)
    if shewhart:
        changed["detectors"] = changed["detectors"][:1]
    *parents, last = [int(step) if step.isdigit() else step for step in path.split(".")]
    section: Any = changed
    for step in parents:
        section = section[step]
    section[last] = value
    return {"weight": changed}


def changed_by(read: Read, path: str, value: object) -> list[int]:
    """Which of (baseline, detector 0, 1, 2, 3) have another revision after the edit."""
    before = revisions(read())
    after = revisions(read(characteristics=edited(path, value)))
    return [index for index, (a, b) in enumerate(zip(before, after, strict=True)) if a != b]


def test_a_revision_is_what_it_says_it_is(read: Read) -> None:
    """SHA-256 over RFC 8785, which for these values is sorted, compact JSON."""
    plan = only(read(characteristics={"glue": GLUE}))
    declared = {
        "source": {"topic": "plant/glue", "payload": "number"},
        "subgroup": {},
        "baseline": {"mean": 165, "sigma": 1.2},
        "detector": {"kind": "cusum", "k": 1, "h": 4},
    }

    def digest(value: object) -> str:
        text = json.dumps(value, sort_keys=True, separators=(",", ":"))
        return hashlib.sha256(text.encode()).hexdigest()[:32]

    assert plan.judgement.detectors[1].revision == digest(declared)
    assert plan.judgement.baseline.revision == digest(declared["baseline"])


@pytest.mark.parametrize(
    ("path", "value"),
    [
        ("title", "Weight"),
        ("unit", "kg"),
        ("resolution", 0.1),
        ("specification.nominal", 341),
        ("priority", "low"),
        ("reaction", ["nothing"]),
        ("detectors.3.name", "slower"),
        ("detectors.0.name", "shewhart"),
        # defaults, written down
        ("detectors.0.width", 3),
        ("detectors.0.chart", "mean"),
        ("detectors.0.rules", "outside-limits"),
        ("detectors.0.rules", [{"rule": "outside", "width": 3}]),
        ("detectors.0.direction", "both"),
        ("detectors.1.rules", ["outside"]),
        ("detectors.2.chart", "mean"),
        ("detectors.3.width", 3.0),
        ("detectors.3.after_signal", "restart"),
        # another spelling
        ("subgroup.max_gap", "0.5min"),
        ("subgroup.max_gap", "PT30S"),
        ("source.expected_rate", "10 / s"),
        ("source.use_if./ok", [True]),
        ("baseline.mean", 341.20),
        ("detectors.2.h", 5.0),
    ],
)
def test_what_changes_nothing_that_is_judged(read: Read, path: str, value: object) -> None:
    assert changed_by(read, path, value) == []


@pytest.mark.parametrize(
    ("path", "value", "changed"),
    [
        ("source.topic", "plant/{lane}/scale/+/+", [1, 2, 3, 4]),
        ("source.value", "/a", [1, 2, 3, 4]),
        ("source.plausible.lower", 0, [1, 2, 3, 4]),
        ("source.expected_rate", "601/min", [1, 2, 3, 4]),
        ("source.use_if./ok", 1, [1, 2, 3, 4]),
        ("source.sequence", "/n", [1, 2, 3, 4]),
        ("subgroup.size", 4, [1, 2, 3, 4]),
        ("subgroup.max_gap", "31s", [1, 2, 3, 4]),
        ("subgroup.every", "1min", [1, 2, 3, 4]),
        ("subgroup", {"window": "1min", "min_size": 2}, [1, 2, 3, 4]),
        ("baseline.sigma_between", 0, [0, 1, 2, 3, 4]),
        ("baseline.mean", 341.3, [0, 1, 2, 3, 4]),
        ("detectors.0.width", 3.1, [1]),
        ("detectors.0.rules", "nelson-1984", [1]),
        ("detectors.0.rules", [{"rule": "outside", "width": 2}], [1]),
        ("detectors.0.direction", "up", [1]),
        ("detectors.0.chart", "median", [1]),
        ("detectors.1.chart", "sd", [2]),
        ("detectors.1.direction", "both", [2]),
        ("detectors.2.head_start", 0, [3]),
        ("detectors.2.after_signal", "restart", [3]),
        ("detectors.3.lambda", 0.11, [4]),
        ("detectors.3.limits", "exact", [4]),
    ],
)
def test_what_changes_what_is_judged(
    read: Read, path: str, value: object, changed: list[int]
) -> None:
    assert changed_by(read, path, value) == changed


def test_a_window_written_in_full_is_the_same(read: Read) -> None:
    """Its smallest size is 1, and a mean is what is charted."""
    brief = revisions(read(characteristics=edited("subgroup", {"window": "60s"}, shewhart=True)))
    spelt = {"window": "PT1M", "min_size": 1}
    full = edited("subgroup", spelt, shewhart=True)
    full["weight"]["detectors"][0]["chart"] = "mean"
    assert revisions(read(characteristics=full)) == brief


def test_a_width_is_one_thing_wherever_it_is_written(read: Read) -> None:
    beside = revisions(read(characteristics=edited("detectors.0.width", 2)))
    within = revisions(
        read(characteristics=edited("detectors.0.rules", [{"rule": "outside", "width": 2}]))
    )
    assert beside == within


def test_nothing_outside_a_characteristic_changes_its_revisions(read: Read) -> None:
    other = {
        "broker": {"host": "c"},
        "outputs": {"root": "r", "points": False},
        "alerts": {"off_delay": "5min"},
        "characteristics": {"glue": GLUE, "weight": WEIGHT},
    }
    settings = read(**other)
    plan = settings.plan.characteristics[1]
    assert (
        plan.judgement.baseline.revision,
        *(d.revision for d in plan.judgement.detectors),
    ) == revisions(read())


def test_revisions_do_not_drift(read: Read) -> None:
    """Alert ids are hashed from these: a release that changes them breaks every consumer."""
    assert revisions(read()) == PINNED


PINNED = (
    "5cd8a68cd5c0aeaa3ef8763e1488ee7c",
    "a69ffd2bf48b551b36687e89b4a8e518",
    "0544677b74dee0d0a07974d5cee8c7ab",
    "89c9195c715c29312c3645462110a131",
    "c547fe99771ae74eab7b4c9c13d4cb6c",
)
