"""YAML as a tree with lines: what scalars mean, and what no text may do."""

from __future__ import annotations

import json
import math
from typing import Any

import pytest
import yaml
from hypothesis import given
from hypothesis import strategies as st

from monitor.configuration import yamltree
from monitor.configuration.yamltree import (
    EXACT,
    Filled,
    Flaw,
    UnreadableError,
    at,
    merged,
    plain,
    put,
    read,
    without,
)


@pytest.fixture(params=["CSafeLoader", "SafeLoader"], autouse=True)
def loader(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    """Wheels without libyaml exist: both parsers must do."""
    if not hasattr(yaml, request.param):
        pytest.skip("PyYAML without libyaml")
    monkeypatch.setattr(yamltree, "_LOADER", getattr(yaml, request.param))


def tree(text: str | bytes, **environ: str) -> tuple[Any, list[str]]:
    flaws: list[Flaw] = []
    content = text.encode() if isinstance(text, str) else text
    node = read(content, "x.yaml", environ, flaws)
    return (None if node is None else plain(node)), [str(flaw.problem) for flaw in flaws]


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("on", "on"),
        ("off", "off"),
        ("yes", "yes"),
        ("No", "No"),
        ("true", True),
        ("False", False),
        ("null", None),
        ("~", None),
        ("", None),
        ("30s", "30s"),
        ("5min", "5min"),
        ("12:30", "12:30"),
        ("1:30:00", "1:30:00"),
        ("2026-03-02", "2026-03-02"),
        ("3.1.1", "3.1.1"),
        ("/t", "/t"),
        ("600/min", "600/min"),
        ("010", 10),
        ("0x1F", 31),
        ("0o17", 15),
        ("-7", -7),
        ("+7", 7),
        ("1e3", 1000.0),
        ("1.", 1.0),
        (".5", 0.5),
        ("1_000", "1_000"),
        (".inf", math.inf),
        ("-.inf", -math.inf),
        ("1e999", math.inf),
        (str(EXACT), EXACT),
        (str(EXACT + 2), float(EXACT + 2)),
        ("9" * 5_000, math.inf),
        ("'5'", "5"),
        ('"true"', "true"),
        ("N·m", "N·m"),
        ("😀", "😀"),
    ],
)
def test_scalars_of_yaml_1_2(text: str, value: object) -> None:
    found = tree(f"a: {text}")[0]["a"]
    assert found == value
    assert type(found) is type(value)


def test_not_a_number() -> None:
    assert math.isnan(tree("a: .nan")[0]["a"])


def test_keys_are_texts() -> None:
    assert tree("on: 1\n2: 3\ntrue: 4\nnull: 5")[0] == {"on": 1, "2": 3, "true": 4, "null": 5}


def test_lines_are_those_of_keys_and_items() -> None:
    flaws: list[Flaw] = []
    text = "a:\n  b:\n  - 1\n  - c: 2\n\n    d:\n      7\ne: {f: 1,\n    g: 2}\n"
    node = read(text.encode(), "x.yaml", {}, flaws)
    assert node is not None
    lines = {path: at(node, path).line for path, _ in yamltree.walk(node)}  # type: ignore[union-attr]
    assert lines == {
        (): 1,
        ("a",): 1,
        ("a", "b"): 2,
        ("a", "b", 0): 3,
        ("a", "b", 1): 4,
        ("a", "b", 1, "c"): 4,
        ("a", "b", 1, "d"): 6,
        ("e",): 8,
        ("e", "f"): 8,
        ("e", "g"): 9,
    }


def test_an_equal_key_is_a_flaw() -> None:
    value, flaws = tree("a: {b: 1}\nc: 2\na: 3")
    assert value == {"a": {"b": 1}, "c": 2}
    assert flaws == [
        "x.yaml:3: a: stands twice in one mapping, first in line 1; keep one of the two"
    ]


def test_aliases_and_merge_keys() -> None:
    text = "a: &a {x: 1, y: [2]}\nb: *a\nc: {<<: *a, x: 5}\nd: {<<: [{z: 3}, *a]}"
    assert tree(text) == (
        {
            "a": {"x": 1, "y": [2]},
            "b": {"x": 1, "y": [2]},
            "c": {"x": 5, "y": [2]},
            "d": {"z": 3, "x": 1, "y": [2]},
        },
        [],
    )
    assert "<< takes a mapping" in tree("a: {<<: 5}")[1][0]


@pytest.mark.parametrize(
    ("text", "line", "says"),
    [
        ("a: 1\nb: [1", 2, "not YAML"),
        ("a: 1\n\tb: 2", 2, "not YAML"),
        ("a: b: c", 1, "not YAML"),
        ("a: {lane}/reading", 1, "quotes"),
        ("a: 1\n---\nb: 2", 2, "second document"),
        ("a: *nowhere", 1, "no anchor"),
        ("a: &a [*a]", 1, "no anchor"),
        ("a: 1\n[b]: 2", 2, "should"),
        ("x: &x y\n*x : 2", 2, "should"),
        ("a: " + "[" * 60 + "]" * 60, 1, "too deep"),
        ("a: 1\nb: \0", 2, "U+0000"),
        ("a: 1\nb: \x07", 2, "U+0007"),
        (b"a: 1\nb: \xff", 2, "UTF-8"),
        ('a: 1\n"\\ud800": 2', 2, ""),  # libyaml refuses half a surrogate pair, PyYAML does not
    ],
)
def test_what_cannot_be_read(text: str | bytes, line: int, says: str) -> None:
    with pytest.raises(UnreadableError) as caught:
        tree(text)
    assert caught.value.problem.line == line
    assert says in str(caught.value)


def test_half_a_surrogate_pair_in_a_value_is_refused() -> None:
    try:
        _, flaws = tree('a: "\\ud800"')
    except UnreadableError as error:  # libyaml
        flaws = [str(error)]
    assert len(flaws) == 1
    assert flaws[0].isprintable()


def test_aliases_do_not_multiply() -> None:
    laughs = "a0: &a0 [x]\n" + "".join(
        f"a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 9)}]\n" for i in range(1, 30)
    )
    with pytest.raises(UnreadableError, match="aliases"):
        tree(laughs)
    tower = "a0: &a0 [x]\n" + "".join(
        f"a{i}: &a{i} {'[' * 30}*a{i - 1}{']' * 30}\n" for i in range(1, 60)
    )
    with pytest.raises(UnreadableError, match="aliases"):
        tree(tower)


@pytest.mark.parametrize("tag", ["!!python/object/apply:os.system [x]", "!!str 5", "!mine 5"])
def test_tags_are_refused(tag: str) -> None:
    _, flaws = tree(f"a: {tag}")
    assert len(flaws) == 1
    assert "leave the tag out" in flaws[0]


def test_a_byte_order_mark_and_windows_line_ends_are_harmless() -> None:
    assert tree(b"\xef\xbb\xbfa: 1\r\nb: x\r\n") == ({"a": 1, "b": "x"}, [])


@pytest.mark.parametrize("text", ["", "\n\n", "# only a comment\n", "---\n", "~"])
def test_nothing_is_none(text: str) -> None:
    assert tree(text) == (None, [])


def test_variables() -> None:
    value, flaws = tree('a: "${X}"\nb: p/${X}/${Y}\nc: $X\nd: 5', X="1", Y="z")
    assert value == {"a": "1", "b": "p/1/z", "c": "$X", "d": 5}
    assert flaws == []
    assert isinstance(value["a"], Filled)
    assert not isinstance(value["c"], Filled)


def test_variables_that_are_missing_or_misspelt() -> None:
    _, flaws = tree("a: ${X}\nb:\n  - ${}\n", Y="1")
    assert flaws[0].startswith("x.yaml:1: a: the environment variable X is not set; ")
    assert flaws[1].startswith("x.yaml:3: b[0]: ")
    assert len(flaws) == 2


def test_a_variable_is_not_read_as_yaml_or_filled_again() -> None:
    value, flaws = tree("a: ${X}", X="{b: 1}\n${Y}")
    assert value == {"a": "{b: 1}\n${Y}"}
    assert flaws == []


def test_put_changes_what_is_named_and_nothing_an_alias_shares() -> None:
    flaws: list[Flaw] = []
    whole = read(b"a: &a {b: 1, c: 2}\nd: *a\n", "x.yaml", {}, flaws)
    other = read(b"[9]", "y.yaml", {}, flaws)
    assert whole is not None
    assert other is not None
    changed = put(whole, ("d", "b"), other)
    assert plain(changed) == {"a": {"b": 1, "c": 2}, "d": {"b": [9], "c": 2}}
    assert plain(whole) == {"a": {"b": 1, "c": 2}, "d": {"b": 1, "c": 2}}
    found = at(changed, ("d", "b", 0))
    assert found is not None
    assert (found.file, found.line) == ("y.yaml", 1)
    assert plain(without(changed, {"a", "x"})) == {"d": {"b": [9], "c": 2}}


def test_merging_names_both_places() -> None:
    flaws: list[Flaw] = []
    one = read(b"a: {x: 1, y: 2}\nl: [1]", "one.yaml", {}, flaws)
    two = read(b"\na:\n  z: 3\n  y: 4\nl: [2]\nb: 5", "two.yaml", {}, flaws)
    assert one is not None
    assert two is not None
    assert plain(merged([one, two], flaws)) == {"a": {"x": 1, "y": 2, "z": 3}, "l": [1], "b": 5}
    assert [str(f.problem) for f in flaws] == [
        "two.yaml:4: a.y: also stands in one.yaml:1; keep one of the two",
        "two.yaml:5: l: also stands in one.yaml:2; keep one of the two",
    ]


JSON = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-EXACT, EXACT)
    | st.floats(allow_nan=False)
    | st.text(st.characters(exclude_categories=["Cs", "Cc"], exclude_characters="\ufeff￾￿")),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text("abc<", max_size=3), inner),
    max_leaves=20,
)


@given(JSON.filter(lambda value: value is not None))
def test_json_is_yaml(value: object) -> None:
    text = json.dumps(value, ensure_ascii=False).replace("Infinity", ".inf")
    if "${" in text or "<<" in text or ".inf" in text:
        return
    found, flaws = tree(text)
    assert found == value
    assert flaws == []


@given(st.text(max_size=60) | st.text("ab:-[]{}&*!|>'\"#%@`,? \n\t<$~0.e", max_size=60))
def test_any_text_gives_a_tree_or_is_unreadable(text: str) -> None:
    problem = None
    try:
        tree(text.encode(errors="surrogatepass"))
    except UnreadableError as error:
        problem = error.problem
    assert problem is None or (problem.file == "x.yaml" and problem.wrong and problem.instead)
