"""Numbers with a decimal comma: said plainly, with the place and the number to write."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.configuration import decimal_comma
from monitor.configuration.config import ConfigurationError, load_measured

LINE = """\
version: 1
characteristics:
  net-weight:
    specification: {{lower: {lower}, upper: 352}}
    source: {{topic: plant/jar-line-2/scale, payload: number, expected_rate: 600/min}}
    subgroup:
      size: {size}
      max_gap: {gap}
    baseline:
      mean: {mean}
      sigma: 1.9
    promise: {{false_alarm_every: 14d}}
    detectors:
      - {{kind: cusum, catch: {catch}, name: {name}}}
"""
GOOD = {"lower": "331.5", "size": 5, "gap": "30s", "mean": "341.2", "catch": 0.8, "name": "slow"}


def problems(folder: Path, **changed: str) -> list[str]:
    """What is wrong with the line's configuration once these values are written in it."""
    file = folder / "line.yaml"
    file.write_text(LINE.format(**{**GOOD, **changed}))
    with pytest.raises(ConfigurationError) as caught:
        load_measured(file, {})
    return [str(each).replace(f"{file}:", "") for each in caught.value.problems]


def test_without_one_there_is_nothing_to_say(tmp_path: Path) -> None:
    file = tmp_path / "line.yaml"
    file.write_text(LINE.format(**GOOD))
    assert load_measured(file, {}).characteristics["net-weight"].baseline is not None


@pytest.mark.parametrize(
    ("key", "written", "line", "place", "says"),
    [
        ("mean", "341,2", 10, "baseline.mean", "write 341.2: a decimal point"),
        ("mean", "-0,8e-3", 10, "baseline.mean", "write -0.8e-3: a decimal point"),
        ("mean", "2,962", 10, "baseline.mean", "write 2.962: a decimal point, or 2962 if"),
        ("mean", "0,125", 10, "baseline.mean", "write 0.125: a decimal point"),
        ("mean", "1,000,000", 10, "baseline.mean", "write 1000000: without a comma"),
        ("size", "1,000", 7, "subgroup.size", "write 1000: without a comma"),
        ("size", "2,5", 7, "subgroup.size", "'2,5' is not a whole number"),
        ("gap", "2,5min", 8, "subgroup.max_gap", "write 2.5min: a decimal point"),
        # In braces YAML reads the number before the comma, and a key after it.
        ("catch", "0,8", 14, "detectors[0].catch", "write 0.8: a decimal point"),
        ("catch", "0,8e-1", 14, "detectors[0].catch", "write 0.8e-1: a decimal point"),
        ("lower", "331,5", 4, "specification.lower", "write 331.5: a decimal point"),
    ],
)
def test_is_the_only_thing_said(
    tmp_path: Path, key: str, written: str, line: int, place: str, says: str
) -> None:
    (said,) = problems(tmp_path, **{key: written})
    assert said.startswith(f"{line}: characteristics.net-weight.{place}: ")
    assert written in said
    assert says in said


def test_each_of_several_in_one_pair_of_braces_is_named(tmp_path: Path) -> None:
    said = problems(tmp_path, catch="1,5, ignore: 0,5, head_start: 0,5")
    assert [each.split(": ")[1].rpartition(".")[2] for each in said] == [
        "catch",
        "head_start",
        "ignore",
    ]


def test_what_was_meant_is_judged_on(tmp_path: Path) -> None:
    # 0.9 is above 0.8; were the halves taken as they stand, 0 would not be above 0.
    said = problems(tmp_path, catch="0,9, ignore: 0.8, width: 3")
    assert len(said) == 2
    assert "detectors[0].width: is not a known key" in said[1]


@pytest.mark.parametrize("written", ["a,5", "5,a", "0.8, 5x y", "{head: 4}, 8", "up, 8"])
def test_what_is_no_number_is_not_called_one(tmp_path: Path, written: str) -> None:
    assert not any("decimal" in each for each in problems(tmp_path, catch=written))


def test_a_text_may_hold_a_comma(tmp_path: Path) -> None:
    (said,) = problems(tmp_path, name="'1,5'")
    assert "decimal" not in said


def test_a_filled_in_value_is_not_quoted(tmp_path: Path) -> None:
    file = tmp_path / "line.yaml"
    file.write_text(LINE.format(**{**GOOD, "mean": "${CENTRE}"}))
    with pytest.raises(ConfigurationError) as caught:
        load_measured(file, {"CENTRE": "77,7"})
    assert "77" not in str(caught.value)


@given(st.integers(-999, 999), st.integers(0, 99), st.sampled_from(["", "min", "/min", "GB"]))
def test_the_point_stands_where_the_comma_stood(left: int, right: int, unit: str) -> None:
    assert decimal_comma.pointed(f"{left},{right}{unit}") == f"{left}.{right}{unit}"
    assert decimal_comma.is_cut(f"{left}", f"{right}{unit}")
    assert decimal_comma.pointed(f"{left}.{right}{unit}") is None
