"""Why an alert rang: derived again from the journal it gives the alert's own figures, with the
readings or without."""

from __future__ import annotations

import json
import math
import random
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import journals
import plans
import pytest

from monitor.configuration import presets
from monitor.entries import Configured, Connected, Message, Recorded, Started
from monitor.explaining.explain import Explanation, explain
from monitor.explaining.explain_words import lines
from monitor.journal import open_reader
from monitor.messages import AlertEvent
from monitor.plan import (
    ByWindow,
    CharacteristicPlan,
    Chart,
    CusumPlan,
    DeclaredDetector,
    EwmaPlan,
    Intent,
    LearnPlan,
    Plan,
    RulePlan,
    Scheme,
)
from monitor.times import SECOND

WESTERN, NELSON = (presets.preset(n, 3.0) for n in ("western-electric-1956", "nelson-1984"))


def of(name: str, scheme: Scheme, size: int = 3, **more: object) -> CharacteristicPlan:
    """A characteristic with this one detector, on a topic of its own."""
    return plans.characteristic(
        scheme,
        name=name,
        source=replace(plans.GAUGE, topic=f"line/{name}"),
        size=size,
        mean=10.0,
        sigma=1.0,
        sigma_between=0.1,
        off_delay=2 * SECOND,
        **more,  # type: ignore[arg-type]
    )


def charted(chart: Chart, *rules: RulePlan, size: int = 3) -> CharacteristicPlan:
    name = f"{chart}-{rules[0].rule}-{len(rules)}" if rules else chart
    return of(name, plans.shewhart(*rules, chart=chart, width=2.5), size)


PLAN = Plan(
    (
        of("cusum", CusumPlan("mean", 0.5, 4.0)),
        of("cusum-head", CusumPlan("mean", 0.25, 6.0, head_start=0.5, clip=3.0)),
        of("cusum-held", CusumPlan("mean", 0.5, 4.0, hold=True)),
        of("cusum-slow", CusumPlan("individual", 0.02, 16.0), size=1),
        of("ewma", EwmaPlan("mean", 0.2, 2.5)),
        of("ewma-slow", EwmaPlan("mean", 0.01, 2.0, clip=2.0)),
        of("ewma-held", EwmaPlan("mean", 0.1, 2.5, asymptotic=True, hold=True)),
        replace(of("windows", CusumPlan("mean", 0.5, 4.0)), subgroup=ByWindow(3 * SECOND, 2)),
        replace(of("averaged", EwmaPlan("mean", 0.3, 2.2)), subgroup=ByWindow(3 * SECOND, 2)),
        charted("mean"),
        charted("mean", *WESTERN),
        charted("mean", *WESTERN[1:]),
        charted("individual", *NELSON, size=1),
        charted("individual", *NELSON[2:3], size=1),
        charted("individual", *NELSON[6:], size=1),
        charted("individual", *NELSON[7:], size=1),
        charted("median"),
        charted("median", *WESTERN[1:]),
        charted("range"),
        charted("sd"),
        charted("variance"),
        of("exact", plans.shewhart(chart="range", width=2.0, exact=True)),
        of("spread", CusumPlan("variance", 1.46, 4.0, k_lower=0.6, h_lower=2.0, size=3)),
        of("spread-held", CusumPlan("variance", 1.46, 3.0, 0.5, None, True, "up", size=3)),
        charted("moving_range", size=1),
    )
)
MEANS = {"mean", "individual"}
SQUARES = {"variance", "exact", "spread", "spread-held"}


def recorded(seed: int = 3, seconds: int = 600) -> list[Recorded]:
    """Two readings a second of everything, wandering slowly and now and then varying more."""
    common, squares = random.Random(seed), random.Random(seed + 1)
    entries: list[Recorded] = [
        Started(plans.START),
        Configured(plans.START, PLAN),
        Connected(plans.START, False),
    ]
    for n in range(2 * seconds):
        at, second = plans.START + n * SECOND // 2, n / 2
        drift = 0.7 * math.sin(second / 40) + 0.4 * math.sin(second / 7)
        spread = 2.0 if second % 200 > 170 else 0.4 if second % 200 > 140 else 1.0
        for each in PLAN.characteristics:
            chance = squares if each.name in SQUARES else common
            value = 10.0 + drift + chance.gauss(0.0, spread)
            if each.name.startswith("individual-alternation"):
                value = 10.0 + (-1) ** n * abs(chance.gauss(0.0, 1.0))
            body = {"v": round(value, 3), "t": at / SECOND, "n": n}
            entries.append(Message(at, each.source.topic, json.dumps(body).encode()))
    return entries


@pytest.fixture(scope="module")
def journal(tmp_path_factory: pytest.TempPathFactory) -> Path:
    entries = recorded()
    bases = range(3_000, len(entries), 9_000)
    return journals.write(tmp_path_factory.mktemp("j") / "j.db", entries, bases, batch=500)


@pytest.fixture(scope="module")
def emptied(journal: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The same journal once all its readings are gone."""
    path = tmp_path_factory.mktemp("j") / "emptied.db"
    with closing(sqlite3.connect(journal)) as old, closing(sqlite3.connect(path)) as new:
        old.backup(new)
    return without_readings(path)


def without_readings(path: Path) -> Path:
    """The journal at ``path``, from which they are deleted."""
    with closing(sqlite3.connect(path)) as db:
        db.execute("DELETE FROM entries WHERE position < (SELECT max(position) FROM entries)")
        db.execute("DELETE FROM bases")
        db.commit()
    return path


def raised(path: Path) -> list[AlertEvent]:
    with closing(open_reader(path)) as db:
        found = [json.loads(event) for (event,) in db.execute("SELECT event FROM alerts")]
    return [each for each in found if each["event"] == "raised"]


@contextmanager
def reading(path: Path) -> Iterator[sqlite3.Connection]:
    with closing(open_reader(path)) as db:
        yield db


def told(path: Path, alert: str) -> Explanation:
    with reading(path) as db:
        return explain(db, alert)


def some(path: Path, each: int) -> list[AlertEvent]:
    """The first alerts of each characteristic and rule."""
    found: dict[tuple[str, str], list[AlertEvent]] = {}
    for event in raised(path):
        found.setdefault((event["characteristic"], event["rule"]), []).append(event)
    return [event for events in found.values() for event in events[:each]]


def test_every_kind_of_alert_is_among_them(journal: Path) -> None:
    rules = {event["rule"] for event in raised(journal)}
    assert rules >= {
        *("cusum-upper", "cusum-lower", "ewma-upper", "ewma-lower", "outside-upper"),
        *("outside-lower", "zone-upper", "zone-lower", "run-upper", "run-lower", "alternation"),
        *("stratification", "mixture"),
    }
    assert {event["characteristic"] for event in raised(journal)} >= {
        each.name for each in PLAN.characteristics
    }


def test_from_the_readings_the_figures_are_the_alerts_own(journal: Path) -> None:
    for event in some(journal, 1):
        found = told(journal, event["id"])
        assert (found.source, found.agrees) == ("entries", "exactly"), event["text"]
        assert found.told == event
        assert found.working is not None
        rang, said = found.working.rang, event["statistic"]
        assert said is not None
        assert (rang.value, rang.lower, rang.upper) == (said["value"], said["lower"], said["upper"])
        assert rang.signalled
        assert rang.counts


def test_without_them_they_are_the_same_but_for_rounding(emptied: Path) -> None:
    sums = 0
    for event in some(emptied, 2):
        found = told(emptied, event["id"])
        exact = {"exactly"} if event["detector"] == "cusum" else {"exactly", "to rounding"}
        assert found.source == "evidence"
        assert found.agrees in exact, (event["text"], found.working)
        sums += event["detector"] == "cusum"
    assert sums > 8


def test_both_ways_give_the_same_steps(journal: Path, emptied: Path) -> None:
    compared = 0
    for event in some(journal, 1):
        if event["chart"] not in MEANS:
            continue
        readings, kept = told(journal, event["id"]).working, told(emptied, event["id"]).working
        assert readings is not None
        assert kept is not None
        counted = [each for each in readings.steps if each.counts]
        again = [each for each in kept.steps if each.counts]
        compared += len(again)
        # What was kept may begin later: it is the last 200 subgroups.
        assert len(again) == len(counted) or len(again) > 180
        for one, other in zip(reversed(counted), reversed(again), strict=False):
            assert (one.first, one.size) == (other.first, other.size)
            figures = ("value", "lower", "upper", "mean", "z")
            for a, b in ((getattr(one, name), getattr(other, name)) for name in figures):
                assert (a is None) == (b is None)
                assert a is None or a == pytest.approx(b, rel=1e-9, abs=1e-9)
            assert one.terms == pytest.approx(other.terms, rel=1e-6, abs=1e-6)
    assert compared > 200


def clipped_at_the_width(seed: int) -> list[Recorded]:
    """Many values beyond the clip: of an average that starts afresh, the first such lies exactly on
    its limit, and whether it rings is decided by the last digit."""
    chance = random.Random(seed)
    at_the_width = [
        of(f"{direction}-{lam}", EwmaPlan("mean", lam, 2.5, clip=2.5, direction=direction), size=1)
        for lam in (0.05, 0.2, 0.7)
        for direction in ("both", "up")
    ]
    entries: list[Recorded] = [
        Started(plans.START),
        Configured(plans.START, Plan(tuple(at_the_width))),
        Connected(plans.START, False),
    ]
    for n in range(1_500):
        at = plans.START + n * SECOND
        for each in at_the_width:
            wild = chance.choice((-4.0, 0.0, 4.0)) if n % 60 < 20 else 0.0
            body = {"v": round(10.0 + wild + chance.gauss(0.0, 0.5), 3), "t": at / SECOND, "n": n}
            entries.append(Message(at, each.source.topic, json.dumps(body).encode()))
    return entries


def test_a_point_exactly_on_the_limit_is_judged_as_the_detector_did(tmp_path: Path) -> None:
    path = without_readings(journals.write(tmp_path / "j.db", clipped_at_the_width(1), batch=500))
    events = raised(path)
    assert len(events) > 50
    for event in events:
        found = told(path, event["id"])
        assert found.source == "evidence"
        assert found.agrees != "no", (event["text"], found.working)


def test_the_arithmetic_adds_up(journal: Path) -> None:
    """By hand, from the means: Page's sum, Roberts' average, and the rules' own points."""
    for event in some(journal, 1):
        working = told(journal, event["id"]).working
        assert working is not None
        counted = [step for step in working.steps if step.counts]
        name, rule = event["characteristic"], event["rule"]
        if name == "cusum":
            error, sign = math.sqrt(0.1**2 + 1 / 3), 1 if rule == "cusum-upper" else -1
            total = 0.0
            for step in counted:
                assert step.mean is not None
                total += sign * (step.mean - 10.0) / error - 0.5
                assert step.value == pytest.approx(max(total, 0.0) * error)
            assert total > 4.0
        elif name == "ewma":
            for before, after in pairwise(counted):
                assert after.mean is not None
                assert after.value == pytest.approx(0.2 * after.mean + 0.8 * before.value)
        elif rule == "zone-upper":
            limits = [step.upper for step in counted]
            assert all(s.value > u for s, u in zip(counted, limits, strict=True) if u is not None)
            assert len(counted) in (2, 4)
        elif rule.startswith("run"):
            side = 1 if rule == "run-upper" else -1
            assert len(counted) in (8, 9)
            assert all((step.value - 10.0) * side > 0 for step in counted)
        elif rule == "alternation":
            steps = [b.value - a.value for a, b in pairwise(counted)]
            assert len(counted) == 14
            assert all(a * b < 0 for a, b in pairwise(steps))


def test_says_all_of_it_in_words(journal: Path, emptied: Path) -> None:
    for path in (journal, emptied):
        for event in some(path, 1):
            text = "\n".join(lines(told(path, event["id"])))
            assert text.startswith(event["text"])
            assert event["id"] in text
            assert "◀ rang" in text
            assert "DOES NOT" not in text
            assert repr(event["statistic"]["value"]) in text  # type: ignore[index]


def test_the_configuration_is_the_one_in_force_then(tmp_path: Path) -> None:
    entries = recorded(seconds=200)
    harder = Plan(
        tuple(replace(each, title="Now", judgement=None) for each in PLAN.characteristics)
    )
    entries.append(Configured(entries[-1].time, harder))
    path = journals.write(tmp_path / "j.db", entries, batch=500)
    event = raised(path)[0]
    found = told(path, event["id"])
    assert found.plan.title == event["title"] != "Now"
    assert found.judgement is not None
    assert found.judgement.baseline.mean == 10.0
    assert found.unchanged is False
    assert found.agrees == "exactly"
    assert "today it is judged otherwise" in " ".join(lines(found))
    same = journals.write(tmp_path / "same.db", entries[:-1], batch=500)
    assert told(same, event["id"]).unchanged is True


def test_by_a_baseline_that_the_stream_learned(tmp_path: Path) -> None:
    """In the journal it is among what the stream remembers, not in the configuration."""
    declared = (
        DeclaredDetector(
            "cusum", "cusum", Intent("cusum", "mean", 1e4, 3, catch=1.5), '{"detector":1}'
        ),
        DeclaredDetector(
            "spread",
            "cusum",
            Intent("cusum", "variance", 1e4, 3, catch_ratio=1.5),
            '{"detector":2}',
        ),
    )
    learn = LearnPlan(1_000, 8 * 3_600 * SECOND, True, declared)
    plan = replace(of("learned", CusumPlan("mean", 0.5, 4.0)), judgement=None, learn=learn)
    chance = random.Random(5)
    values = [chance.gauss(10.0, 1.0) for _ in range(3_010)]
    values += [chance.gauss(13.0, 1.0) for _ in range(30)]
    values += [chance.gauss(10.0, 1.0 if n < 300 else 3.0) for n in range(360)]
    entries: list[Recorded] = [
        Started(plans.START),
        Configured(plans.START, Plan((plan,))),
        Connected(plans.START, False),
    ]
    for n, value in enumerate(values):
        at = plans.START + 10 * n * SECOND
        body = {"v": round(value, 3), "t": at / SECOND, "n": n}
        entries.append(Message(at, plan.source.topic, json.dumps(body).encode()))
    path = journals.write(tmp_path / "j.db", entries, batch=500)
    assert {event["detector"] for event in raised(path)} == {"cusum", "spread"}
    for event in raised(path):
        found = told(path, event["id"])
        assert (found.source, found.agrees, found.unchanged) == ("entries", "exactly", True)
        assert found.judgement is not None
        assert event["baseline"] is not None
        assert found.judgement.baseline.mean == event["baseline"]["mean"] != 10.0


def test_an_alert_of_the_gauge_has_no_arithmetic(tmp_path: Path) -> None:
    entries = recorded(seconds=10)
    entries.append(Connected(entries[-1].time + 1, False))
    path = journals.write(tmp_path / "j.db", entries)
    event = next(each for each in raised(path) if each["detector"] == "gauge")
    found = told(path, event["id"])
    assert (found.working, found.agrees, found.source) == (None, None, "entries")
    text = "\n".join(lines(found))
    assert text.startswith(event["text"])
    assert "the broker" in text


def test_what_disagrees_is_said(journal: Path, tmp_path: Path) -> None:
    path = tmp_path / "j.db"
    with closing(sqlite3.connect(journal)) as old, closing(sqlite3.connect(path)) as new:
        old.backup(new)
        new.execute("UPDATE alerts SET event = replace(event, '\"value\":', '\"value\":1')")
        new.commit()
    event = next(each for each in raised(path) if each["detector"] == "cusum")
    found = told(path, event["id"])
    assert found.agrees == "no"
    assert "IT DOES NOT GIVE THE FIGURES" in "\n".join(lines(found))
