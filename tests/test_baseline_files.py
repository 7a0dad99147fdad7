"""Baselines in files of their own: read, judged with the same words, and changing no alert id."""

from __future__ import annotations

import json
import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
import yaml

from monitor.configuration.config import ConfigurationError
from monitor.configuration.resolve import read_plan
from monitor.plan import BaselinePlan, CharacteristicPlan, Stream

OWN = {"head=1;lane=1": {"mean": 339, "sigma": 2}, "head=2;lane=1": {"mean": 341, "sigma": 1.5}}
VALUES: dict[str, Any] = {"mean": 340, "sigma": 1.9, "sigma_between": 0.4, "by_stream": OWN}
HEADER: dict[str, Any] = {
    "version": 1,
    "characteristic": "weight",
    "unit": "g",
    "origin": {
        "recordings": [{"name": "week-9.jsonl.gz", "sha256": "0f" * 32}],
        "first": "2026-02-23T06:00:00Z",
        "last": "2026-03-01T22:00:00.5+01:00",
        "counts": {"readings": 604_800, "set_aside": 12, "subgroups": 120_000, "streams": 2},
        "choices": {"sigma": "pooled", "trimmed": 0.01, "robust": False},
        "note": "After the overhaul.",
    },
}
WEIGHT: dict[str, Any] = {
    "unit": "g",
    "source": {
        "topic": "plant/{lane}/scale",
        "payload": "json",
        "value": "/net",
        "stream": {"head": "/head"},
    },
    "subgroup": {"size": 5},
    "detectors": [{"kind": "shewhart"}, {"kind": "cusum", "k": 0.5, "h": 5}],
}

Read = Callable[..., CharacteristicPlan]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    """The plan of the weight with this baseline; ``file`` is written as b.yaml first."""

    def make(
        baseline: object, file: object = None, text: str | None = None, **environ: str
    ) -> CharacteristicPlan:
        if file is not None:
            text = yaml.safe_dump(file, sort_keys=False)
        if text is not None:
            (tmp_path / "b.yaml").write_text(text)
        section = WEIGHT | {"baseline": baseline}
        path = tmp_path / "line.yaml"
        path.write_text(json.dumps({"version": 1, "characteristics": {"weight": section}}))
        (plan,) = read_plan(path, environ).characteristics
        return plan

    return make


def problems(read: Read, *arguments: Any, **environ: str) -> list[str]:
    with pytest.raises(ConfigurationError) as caught:
        read(*arguments, **environ)
    return [
        f"{os.path.basename(each.file)}:{each.line}: {each.key}: {each.wrong}; {each.instead}"
        for each in caught.value.problems
    ]


def test_values_of_every_stream(read: Read) -> None:
    plan = read({"file": "b.yaml"}, HEADER | VALUES)
    assert plan.judgement is not None
    one, two, other = (
        plan.judgement_of((("head", head), ("lane", "1"))) for head in ("1", "2", "3")
    )
    assert one
    assert two
    assert other is plan.judgement
    found = [(j.baseline.mean, j.baseline.sigma, j.baseline.sigma_between) for j in (one, two)]
    assert found == [(339.0, 2.0, 0.0), (341.0, 1.5, 0.0)]
    assert other.baseline == BaselinePlan(340.0, 1.9, 0.4, other.baseline.revision)


def test_only_some_streams(read: Read) -> None:
    plan = read({"file": "b.yaml"}, HEADER | {"by_stream": OWN})
    assert plan.judgement is None
    assert plan.judgement_of((("head", "9"), ("lane", "1"))) is None
    assert len(plan.by_stream) == 2


def test_values_alone_decide_alert_ids(read: Read) -> None:
    """Inline, in YAML, in JSON, under another name, of another origin: the same plan, and so the
    same revisions."""
    inline = read(VALUES)
    file = read({"file": "b.yaml"}, HEADER | VALUES)
    as_json = read({"file": "b.yaml"}, text=json.dumps(HEADER | VALUES, indent=2))
    bare = HEADER | VALUES | {"origin": {"note": "x"}}
    assert inline == file == as_json == read({"file": "./b.yaml"}, bare)


def test_a_streams_revision_is_that_of_its_own_values(read: Read) -> None:
    before = read(VALUES)
    moved = read(VALUES | {"mean": 350, "by_stream": OWN | {"head=2;lane=1": VALUES_OF_ONE}})
    one, two = ((("head", head), ("lane", "1")) for head in ("1", "2"))
    assert moved.judgement_of(one) == before.judgement_of(one)
    for stream in (two, ()):
        assert not set(revisions(before, stream)) & set(revisions(moved, stream))
    assert moved.judgement_of(two) == read(VALUES_OF_ONE).judgement


def revisions(plan: CharacteristicPlan, stream: Stream) -> list[str]:
    judgement = plan.judgement_of(stream)
    assert judgement is not None
    return [judgement.baseline.revision, *(each.revision for each in judgement.detectors)]


VALUES_OF_ONE = {"mean": 341.5, "sigma": 1.5}


def test_ten_thousand_streams_share_what_is_equal(read: Read) -> None:
    own = {
        f"head={i};lane={j}": {"mean": 340 + i % 3, "sigma": 2}
        for i in range(100)
        for j in range(100)
    }
    plan = read({"file": "b.yaml"}, text=json.dumps(HEADER | {"by_stream": own}))
    assert len(plan.by_stream) == 10_000
    assert len({id(judgement) for judgement in plan.by_stream.values()}) == 3


def test_percent_encoded_streams(read: Read) -> None:
    plan = read({"by_stream": {"lane=a%3Bb;head=100%25": VALUES_OF_ONE}})
    assert list(plan.by_stream) == [(("head", "100%"), ("lane", "a;b"))]


FILE = """\
version: 1
characteristic: weight
unit: g
mean: 340
sigma: 1.9
by_stream:
  head=1;lane=1: {mean: 339, sigma: 2}
  head=2;lane=1:
    mean: 341
    sigma: 1.5
origin:
  recordings:
    - name: week-9.jsonl.gz
      sha256: "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
  first: 2026-02-23T06:00:00Z
  counts: {readings: 5}
  choices: {sigma: pooled}
"""

MISTAKES = [
    # old, new, line, key, wrong, instead
    ("version: 1", "version: 2", 1, "version", "2 is no version of a baseline", "version: 1"),
    ("version: 1\n", "", 1, "version", "is missing", "version: 1"),
    ("characteristic: weight\n", "", 1, "characteristic", "is missing", "the name"),
    ("characteristic: weight", "characteristic: w", 2, "characteristic", "'w' is not weight", "wr"),
    ("characteristic: weight", "characteristic: 5", 2, "characteristic", "5 is not text", "name"),
    ("unit: g", "unit: kg", 3, "unit", "'kg' is not the characteristic's unit", "mend one"),
    ("unit: g", "unti: g", 3, "unti", "is not a known key", "did you mean unit?"),
    ("mean: 340\n", "", 4, "sigma", "1.9 has no mean beside it", "write mean: too"),
    ("sigma: 1.9\n", "", 1, "sigma", "is missing", "1.9"),
    ("mean: 340\nsigma: 1.9\n", "sigma_between: 1\n", 4, "sigma_between", "has no mean", "mean:"),
    ("sigma: 1.9", "sigma: 0", 5, "sigma", "0 is not above 0", "1.9"),
    ("sigma: 1.9", "sigma: 1.9\nfile: x", 6, "file", "is not a known key", "known here"),
    ("mean: 339, ", "", 7, "by_stream.head=1;lane=1.mean", "is missing", "341.2"),
    ("mean: 341", "mean: x", 9, "by_stream.head=2;lane=1.mean", "'x' is not a number", "341.2"),
    ("sigma: 1.5", "sigma:", 10, "by_stream.head=2;lane=1.sigma", "has no value", "leave the key"),
    ("head=2;lane=1", "head=2", 8, "by_stream.head=2", "keys are head, lane", "head=…;lane=…"),
    ("head=2;lane=1", "lane=2", 8, "by_stream.lane=2", "is no stream of this", "head=…;lane=…"),
    ("head=2;lane=1", "a=2", 8, "by_stream.a=2", "is no stream of this", "head=…;lane=…"),
    ("head=2;lane=1", "head 2", 8, "by_stream.head 2", "is no stream", "head=4;lane=1"),
    ("head=2;lane=1", "head=1;lane=%31", 8, "by_stream.head=1;lane=%31", "stands above", "one of"),
    ("head=2;lane=1", "lane=1;head=1", 8, "by_stream.lane=1;head=1", "stands above", "one of"),
    ("name: week-9.jsonl.gz", "nam: x", 13, "origin.recordings[0].nam", "not a known", "name"),
    ('"0123', '"x123', 14, "origin.recordings[0].sha256", "holds a character", "64 hex"),
    ("2026-02-23T06:00:00Z", "2026-02-23", 15, "origin.first", "is no time with an", "T06:00:00Z"),
    ("readings: 5", "readings: -5", 16, "origin.counts.readings", "-5 is below 0", "how many"),
    ("readings: 5", "heads: 5", 16, "origin.counts.heads", "is not a known key", "readings"),
    ("sigma: pooled", "sigma: [a]", 17, "origin.choices.sigma", "is not a text, number", "only"),
    ("mean: 340", "mean: ${M}", 4, "mean", "variable M is not set", "set it"),
    ("mean: 340", "mean: 340\nmean: 341", 5, "mean", "stands twice", "keep one"),
]


@pytest.mark.parametrize(("old", "new", "line", "key", "wrong", "instead"), MISTAKES)
def test_a_mistake_in_the_file(
    read: Read, old: str, new: str, line: int, key: str, wrong: str, instead: str
) -> None:
    """At its line of that file, under the key that stands there."""
    assert FILE.count(old) == 1, old
    (found,) = problems(read, {"file": "b.yaml"}, None, FILE.replace(old, new))
    start = f"b.yaml:{line}: {key}: "
    assert found.startswith(start)
    said, _, to_do = found.removeprefix(start).partition("; ")
    assert wrong in said
    assert instead in to_do


def test_an_origin_that_says_nothing(read: Read) -> None:
    before = FILE[: FILE.index("origin:")]
    for origin in ("origin: {}\n", ""):
        (found,) = problems(read, {"file": "b.yaml"}, None, before + origin)
        assert ": origin: " in found


def test_mistakes_in_both_files_at_once(read: Read) -> None:
    text = FILE.replace("sigma: 1.9", "sigma: -1").replace("mean: 341", "mean: x")
    found = problems(read, {"file": "b.yaml", "mean": 4}, None, text)
    assert [each.partition(": ")[0] for each in found] == ["b.yaml:5", "b.yaml:9", "line.yaml:1"]
    assert "characteristics.weight.baseline.mean: 4 stands beside file" in found[2]


@pytest.mark.parametrize(
    ("baseline", "wrong"),
    [
        ({"file": "none.yaml"}, "the file cannot be read (No such file or directory)"),
        ({"file": "."}, "the file cannot be read (Is a directory)"),
        ({"file": 5}, "5 is not text"),
        ({"file": {"mean": 5}}, "a mapping is not text"),
        ({"file": ""}, "the file cannot be read"),
    ],
)
def test_no_such_file(read: Read, baseline: object, wrong: str) -> None:
    (found,) = problems(read, baseline)
    assert found.startswith(f"line.yaml:1: characteristics.weight.baseline.file: {wrong}")
    assert "write the path of a baseline file, relative to the configuration" in found


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "b.yaml:1: : holds no baseline; begin with version: 1"),
        ("- 1\n", "b.yaml:1: : holds no baseline; begin with version: 1"),
        ("mean: [\n", "b.yaml:1: : this is not YAML"),
        ("a: \x07\n", "b.yaml:1: : this line holds the control character U+0007"),
    ],
)
def test_a_file_without_a_baseline(read: Read, text: str, said: str) -> None:
    (found,) = problems(read, {"file": "b.yaml"}, None, text)
    assert found.startswith(said)


@pytest.mark.parametrize(
    "values",
    [{"mean": 3}, {"sigma": 3}, {"mean": 3, "sigma": 2}, {"sigma_between": 1}, {"by_stream": OWN}],
)
def test_nothing_may_stand_beside_a_file(read: Read, values: dict[str, object]) -> None:
    found = problems(read, {"file": "b.yaml", **values}, HEADER | VALUES)
    keys = [each.split(": ")[1] for each in found]
    assert keys == [f"characteristics.weight.baseline.{key}" for key in values]
    assert all("stands beside file" in each for each in found)


def test_what_a_variable_holds_is_never_shown(read: Read) -> None:
    secret = "hunter2"
    found = problems(read, {"file": "${B}/x.yaml"}, B=secret)
    found += problems(read, {"file": "${B}"}, None, "mean: [", B="b.yaml")
    found += problems(read, {"file": "b.yaml"}, None, FILE.replace("1.9", "${B}"), B=secret)
    assert len(found) == 3
    assert secret not in "".join(found)
    assert "${B}:1" in found[1]


def test_the_file_of_another_characteristic(tmp_path: Path) -> None:
    """Two characteristics that name one file by an alias: it is for one of them only."""
    (tmp_path / "b.yaml").write_text(
        "{version: 1, characteristic: a, mean: 1, sigma: 1, origin: {note: x}}"
    )
    (tmp_path / "line.yaml").write_text(
        "version: 1\n"
        "characteristics:\n"
        "  a: &a\n"
        "    source: {topic: x, payload: number}\n"
        "    baseline: {file: b.yaml}\n"
        "    detectors: [{kind: shewhart}]\n"
        "  b: *a\n"
    )
    with pytest.raises(ConfigurationError) as caught:
        read_plan(tmp_path / "line.yaml", {})
    (problem,) = caught.value.problems
    assert (problem.key, problem.line) == ("characteristic", 1)
    assert problem.wrong == "'a' is not b, whose baseline this file is named as"


def test_a_characteristic_of_one_stream(tmp_path: Path) -> None:
    (tmp_path / "line.yaml").write_text(
        "version: 1\n"
        "characteristics:\n"
        "  a:\n"
        "    source: {topic: x, payload: number}\n"
        "    baseline: {by_stream: {head=1: {mean: 1, sigma: 1}}}\n"
        "    detectors: [{kind: shewhart}]\n"
    )
    with pytest.raises(ConfigurationError, match="needs stream keys in source; write mean: and"):
        read_plan(tmp_path / "line.yaml", {})


def test_relative_to_a_folder_of_files(tmp_path: Path) -> None:
    """Below the folder, where it is no part of the configuration."""
    (tmp_path / "baselines").mkdir()
    (tmp_path / "baselines" / "b.yaml").write_text(yaml.safe_dump(HEADER | VALUES))
    section = WEIGHT | {"baseline": {"file": "baselines/b.yaml"}}
    whole = {"version": 1, "characteristics": {"weight": section}}
    (tmp_path / "line.yaml").write_text(json.dumps(whole))
    (plan,) = read_plan(tmp_path, {}).characteristics
    assert len(plan.by_stream) == 2
