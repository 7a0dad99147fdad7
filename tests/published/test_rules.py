"""Every decision rule on sequences that were worked out by hand, through ``driftbell-replay play``.

Sources of the rules: Western Electric Company, Statistical Quality Control Handbook (1956);
L. S. Nelson, J. Quality Technology 16 (1984); E. S. Page, Biometrika 41 (1954); J. M. Lucas &
R. B. Crosier, Technometrics 24 (1982); S. W. Roberts, Technometrics 1 (1959). The lengths and
widths of the two rule sets are from memory. What a pattern rule does after a signal, and what
counts as beyond, is our own contract.

Points are written in standard errors from the centre; the baseline is mean 100, sigma 1, so that z
stands in the table as 100 + z. They are eighths, so that nothing is rounded.
"""

from __future__ import annotations

import csv
import json
from pathlib import Path
from typing import Any

import pytest

from replay.__main__ import main

Row = dict[str, str]

WESTERN_ELECTRIC = {"kind": "shewhart", "rules": "western-electric-1956"}
NELSON = {"kind": "shewhart", "rules": "nelson-1984"}


class Line:
    """A characteristic to be played; what the files say afterwards."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder

    def play(
        self,
        values: list[float],
        *detectors: dict[str, object],
        size: int = 1,
        times: list[str] | None = None,
        **characteristic: object,
    ) -> tuple[list[Row], list[dict[str, Any]]]:
        """The rows of --points and the events of --alerts."""
        config, table = self._folder / "line.yaml", self._folder / "readings.csv"
        points, alerts = self._folder / "points.csv", self._folder / "alerts.jsonl"
        subgroup: dict[str, object] = {"size": size}
        if times:
            subgroup["max_gap"] = "30s"
        document = {
            "version": 1,
            "broker": {"host": "localhost"},
            "outputs": {"root": "test/monitor"},
            "journal": {"path": "line.db"},
            "characteristics": {
                "weight": {
                    "source": {"topic": "test/weight", "payload": "number"},
                    "subgroup": subgroup,
                    "baseline": {"mean": 100, "sigma": 1},
                    "detectors": list(detectors),
                    **characteristic,
                }
            },
        }
        config.write_text(json.dumps(document))  # JSON is YAML
        with table.open("w", newline="") as file:
            writer = csv.writer(file)
            writer.writerow(["value", "time"] if times else ["value"])
            writer.writerows(zip(values, times, strict=True) if times else ([v] for v in values))
        arguments = ["play", str(config), str(table)]
        assert main([*arguments, "--points", str(points), "--alerts", str(alerts)]) == 0
        with points.open(newline="") as file:
            rows = list(csv.DictReader(file))
        return rows, [json.loads(line) for line in alerts.read_text().splitlines()]

    def rules(
        self, z: list[float], detector: dict[str, object], **characteristic: object
    ) -> dict[int, str]:
        """Point number -> rule column, of the points where a rule is named."""
        rows, _ = self.play([100 + each for each in z], detector, **characteristic)
        return {int(row["number"]): row["rule"] for row in rows if row["rule"]}


@pytest.fixture
def line(tmp_path: Path) -> Line:
    return Line(tmp_path)


def shewhart(*rules: dict[str, object], **keys: object) -> dict[str, object]:
    return {"kind": "shewhart", "rules": list(rules), **keys}


# ── one rule at a time ───────────────────────────────────────────────────────────────────────────


def test_outside_signals_at_each_point_beyond(line: Line) -> None:
    # 3 is on the limit, so it is not beyond it; every later point is.
    found = line.rules([0, 3, 3.5, -3.5, 3.25, -3], shewhart({"rule": "outside", "width": 3}))
    assert found == {3: "outside-upper", 4: "outside-lower", 5: "outside-upper"}


def test_zone_signals_at_each_point_that_meets_it(line: Line) -> None:
    found = line.rules(
        # 1     2    3   4    5     6    7     8  9  10
        [2.5, 2.5, 0, 2.5, -2.5, 2.5, -2.5, 2, 0, 2.5],
        shewhart({"rule": "zone", "count": 2, "of": 3, "width": 2}),
    )
    assert found == {
        2: "zone-upper",  # 1 and 2, though there are only two points yet
        # 3: points 1 and 2 are beyond, but the newest is not
        4: "zone-upper",  # 2 and 4
        # 5: below; of the last three only itself is
        6: "zone-upper",  # 4 and 6
        7: "zone-lower",  # 5 and 7
        # 8: on the line, not beyond; 10: alone among 8, 9, 10
    }


def test_zone_four_of_five(line: Line) -> None:
    found = line.rules(
        # 1    2    3    4    5    6     7    8    9   10   11
        [1.5, 1.5, 1.5, 1.5, 0.5, 1.5, -1.5, 1.5, 1.5, 1.5, 1.5],
        shewhart({"rule": "zone", "count": 4, "of": 5, "width": 1}),
    )
    # 4: 1 to 4. 6: 2, 3, 4, 6. 8 has 4, 6, 8; 9 has 6, 8, 9; 10: 6, 8, 9, 10. 11: 8 to 11.
    assert found == {4: "zone-upper", 6: "zone-upper", 10: "zone-upper", 11: "zone-upper"}


def test_run_needs_a_fresh_run_after_a_signal(line: Line) -> None:
    found = line.rules([0.5] * 17 + [-0.5] * 8, shewhart({"rule": "run", "length": 8}))
    # 1 to 8, 9 to 16; 17 begins a third that the side change ends; 18 to 25 below.
    assert found == {8: "run-upper", 16: "run-upper", 25: "run-lower"}


def test_a_point_on_the_centre_ends_a_run(line: Line) -> None:
    found = line.rules(
        [0.5] * 7 + [0] + [0.5] * 7 + [-0.5] + [0.5] * 8, shewhart({"rule": "run", "length": 8})
    )
    assert found == {24: "run-upper"}  # 17 to 24


def test_trend_counts_points_and_needs_fresh_ones(line: Line) -> None:
    rising = [0.0, 0.25, 0.5, 0.75, 1.0, 1.25, 1.5, 1.75, 2.0, 2.25, 2.5]
    # 1 to 6 are six rising points; the next six would be 7 to 12, but there are only 11 ...
    assert line.rules(rising, shewhart({"rule": "trend", "length": 6})) == {6: "trend-up"}
    # ... and with a twelfth there are.
    found = line.rules([*rising, 2.75], shewhart({"rule": "trend", "length": 6}))
    assert found == {6: "trend-up", 12: "trend-up"}


def test_a_turning_point_begins_the_next_trend(line: Line) -> None:
    found = line.rules(
        # 1     2     3    4    5     6     7     8     9     10
        [0.0, 0.25, 0.5, 0.75, 1.0, 0.75, 0.5, 0.25, 0.0, -0.25],
        shewhart({"rule": "trend", "length": 6}),
    )
    assert found == {10: "trend-down"}  # 5 to 10; 1 to 5 rise, but are five


def test_equal_neighbours_end_a_trend(line: Line) -> None:
    found = line.rules(
        # 1     2     3    4    5     6     7     8    9
        [0.0, 0.25, 0.5, 0.5, 0.75, 1.0, 1.25, 1.5, 1.75],
        shewhart({"rule": "trend", "length": 6}),
    )
    assert found == {9: "trend-up"}  # 4 to 9: the second of the equal ones begins it


def test_alternation_counts_points_and_needs_fresh_ones(line: Line) -> None:
    rule = shewhart({"rule": "alternation", "length": 14})
    # 1 to 14, then 15 to 28.
    assert line.rules([0, 1] * 13 + [0], rule) == {14: "alternation"}
    assert line.rules([0, 1] * 14, rule) == {14: "alternation", 28: "alternation"}


def test_equal_neighbours_end_an_alternation(line: Line) -> None:
    rule = shewhart({"rule": "alternation", "length": 14})
    # 1 to 13 alternate and end at 0; 14 equals 13; 14 to 27 are fourteen again.
    z = [0, 1] * 6 + [0] + [0, 1] * 7
    assert line.rules(z, rule) == {27: "alternation"}


def test_two_steps_the_same_way_begin_an_alternation_again(line: Line) -> None:
    # 12 to 13 and 13 to 14 both rise; the alternation goes on from 13 and is fourteen at 26.
    z = [1, 0] * 6 + [1] + [2, 1] * 7
    found = line.rules(z, shewhart({"rule": "alternation", "length": 14}))
    assert found == {26: "alternation"}


def test_stratification(line: Line) -> None:
    rule = shewhart({"rule": "stratification", "length": 15, "width": 1})
    inside = [0.5, -0.5, 0.75, -0.25, 0.0]
    assert line.rules(inside * 6, rule) == {15: "stratification", 30: "stratification"}
    # Point 15 is on the line, which is not inside: fifteen more are needed, 16 to 30.
    assert line.rules([*inside * 2, *inside[:4], 1, *inside * 3], rule) == {30: "stratification"}


def test_mixture_counts_both_sides_and_needs_fresh_points(line: Line) -> None:
    rule = shewhart({"rule": "mixture", "length": 8, "width": 1})
    outside = [1.5, -1.5, -1.25, 2.0]
    assert line.rules(outside * 4, rule) == {8: "mixture", 16: "mixture"}
    # The eighth is on the line, which is not outside: 9 to 16.
    assert line.rules([*outside, *outside[:3], 1, *outside * 2], rule) == {16: "mixture"}


def test_a_direction_leaves_the_other_side_out(line: Line) -> None:
    rules: list[dict[str, object]] = [{"rule": "outside", "width": 3}, {"rule": "run", "length": 3}]
    z = [3.5, -3.5, -0.5, -0.5, 0.5, 0.5, 0.5]
    assert line.rules(z, shewhart(*rules, direction="up")) == {1: "outside-upper", 7: "run-upper"}
    assert line.rules(z, shewhart(*rules, direction="down")) == {2: "outside-lower", 4: "run-lower"}


# ── presets ──────────────────────────────────────────────────────────────────────────────────────


def test_outside_limits_is_the_default_and_looks_at_nothing_else(line: Line) -> None:
    z = [2.75] * 20 + [3.25]
    assert line.rules(z, {"kind": "shewhart"}) == {21: "outside-upper"}
    assert line.rules(z, {"kind": "shewhart", "width": 2.5}) == dict.fromkeys(
        range(1, 22), "outside-upper"
    )


def test_western_electric_1956(line: Line) -> None:
    assert line.rules([3.25], WESTERN_ELECTRIC) == {1: "outside-upper"}
    assert line.rules([-2.5, 0, -2.5], WESTERN_ELECTRIC) == {3: "zone-lower"}  # 2 of 3 beyond 2
    assert line.rules([1.5, 1.5, -1.5, 1.5, 1.5], WESTERN_ELECTRIC) == {5: "zone-upper"}  # 4 of 5
    assert line.rules([-0.5] * 8, WESTERN_ELECTRIC) == {8: "run-lower"}
    # The handbook's four know no trend, no alternation, no stratification and no mixture.
    assert line.rules([-0.5, -0.25, 0, 0.25, 0.5, 0.75], WESTERN_ELECTRIC) == {}
    assert line.rules([0.5, -0.5] * 8, WESTERN_ELECTRIC) == {}
    assert line.rules([1.5, -1.5] * 8, WESTERN_ELECTRIC) == {}


def test_nelson_1984(line: Line) -> None:
    assert line.rules([-3.25], NELSON) == {1: "outside-lower"}
    # Nine in a row on one side, where eight are not yet enough.
    assert line.rules([0.5, 0.5, 0.75] * 3, NELSON) == {9: "run-upper"}
    assert line.rules([-0.5, -0.25, 0, 0.25, 0.5, 0.75], NELSON) == {6: "trend-up"}
    assert line.rules([1.25, -0.5] * 7, NELSON) == {14: "alternation"}
    assert line.rules([2.5, 0, 2.5], NELSON) == {3: "zone-upper"}  # 2 of 3 beyond 2
    assert line.rules([-1.5, -1.5, 0, -1.5, -1.5], NELSON) == {5: "zone-lower"}  # 4 of 5 beyond 1
    # Fifteen within 1; pairs keep it from alternating, the sides from running.
    assert line.rules([0.5, 0.5, -0.5, -0.5] * 4, NELSON) == {15: "stratification"}
    # Eight outside 1; pairs again, and never four of five on one side.
    assert line.rules([1.5, 1.5, -1.5, -1.5] * 2, NELSON) == {8: "mixture"}


def test_width_moves_only_the_outer_limit_of_a_preset(line: Line) -> None:
    wide = {**WESTERN_ELECTRIC, "width": 4}
    # 3.5 is inside 4; two of three beyond 2 all the same.
    assert line.rules([3.5, 0, 3.5, 4.5], wide) == {3: "zone-upper", 4: "outside-upper;zone-upper"}


def test_several_rules_at_one_point(line: Line) -> None:
    # 1: beyond 3. 2: beyond 3, and 2 of 3 beyond 2. 3: the same. 4: 4 of 5 beyond 1 as well, which
    # has the name that is there already.
    assert line.rules([3.5] * 4, WESTERN_ELECTRIC) == {
        1: "outside-upper",
        2: "outside-upper;zone-upper",
        3: "outside-upper;zone-upper",
        4: "outside-upper;zone-upper",
    }


def test_alert_lines_name_the_first_rule_then_each_further_one_once(line: Line) -> None:
    _, events = line.play([103.5, 103.5, 96.5, 103.5], WESTERN_ELECTRIC)
    # 1: outside opens the alert upwards. 2: zone is new in it, outside is only counted. 3: below is
    # an alert of its own. 4: outside again, and 2 of 3 beyond 2 (2 and 4): nothing new.
    assert [(e["event"], e["subgroup"]["number"], e["rule"], e["direction"]) for e in events] == [
        ("raised", 1, "outside-upper", "up"),
        ("updated", 2, "outside-upper", "up"),
        ("raised", 3, "outside-lower", "down"),
    ]
    assert [[s["rule"] for s in e["signals"]] for e in events] == [
        ["outside-upper"],
        ["outside-upper", "zone-upper"],
        ["outside-lower"],
    ]
    up, again, down = (event["id"] for event in events)
    assert up == again != down
    assert [e["sequence"] for e in events] == [1, 2, 3]


# ── ranges ───────────────────────────────────────────────────────────────────────────────────────

# Of two normal values the range has mean 2/√π = 1.128379 and standard deviation
# √(2 − 4/π) = 0.852502 sigmas, so that the upper limit is 1.128379 + 3 × 0.852502 = 3.685886; the
# lower one is 0, since 1.128379 − 3 × 0.852502 is less.


def test_range_outside(line: Line) -> None:
    rows, events = line.play(
        [100, 103.625, 100, 103.75, 100, 100],
        {"kind": "shewhart", "chart": "range"},
        size=2,
        baseline={"mean": 100, "sigma": 1, "sigma_between": 5},  # which a range ignores
    )
    assert [(float(row["value"]), row["rule"]) for row in rows] == [
        (3.625, ""),
        (3.75, "outside-upper"),
        (0.0, ""),  # no smaller than the lower limit, which is 0
    ]
    assert all(row["chart"] == row["statistic"] == "range" for row in rows)
    assert [float(row["centre"]) for row in rows] == [pytest.approx(1.128379, abs=1e-6)] * 3
    assert [float(row["upper"]) for row in rows] == [pytest.approx(3.685886, abs=1e-6)] * 3
    assert [float(row["lower"]) for row in rows] == [0.0] * 3
    [raised] = events
    assert (raised["rule"], raised["direction"]) == ("outside-upper", None)


def test_moving_range_is_blank_at_first_and_after_a_gap(line: Line) -> None:
    rows, _ = line.play(
        [100, 103.75, 100, 103.625],
        {"kind": "shewhart", "chart": "moving_range"},
        times=[
            "2026-03-02T06:00:00Z",
            "2026-03-02T06:00:31Z",  # 31 s, where max_gap is 30 s: no neighbour
            "2026-03-02T06:01:01Z",  # 30 s is no gap: 3.75
            "2026-03-02T06:01:02Z",  # 3.625
        ],
    )
    assert [(row["number"], row["value"], row["rule"]) for row in rows] == [
        ("3", "3.75", "outside-upper"),
        ("4", "3.625", ""),
    ]


def test_the_chart_of_single_readings_is_individual_and_of_more_is_mean(line: Line) -> None:
    rows, _ = line.play([100, 102], {"kind": "shewhart"})
    assert [(row["chart"], row["value"]) for row in rows] == [
        ("individual", "100.0"),
        ("individual", "102.0"),
    ]
    rows, _ = line.play([100, 102, 98, 97], {"kind": "shewhart", "name": "centre"}, size=4)
    # Standard error 1/√4 = 0.5: limits 100 ± 1.5; the mean is 99.25.
    [row] = rows
    assert (row["detector"], row["chart"], row["size"]) == ("centre", "mean", "4")
    assert [row[name] for name in ("value", "centre", "lower", "upper")] == [
        "99.25",
        "100.0",
        "98.5",
        "101.5",
    ]


# ── CUSUM ────────────────────────────────────────────────────────────────────────────────────────


def sums(rows: list[Row]) -> dict[str, list[tuple[float, str]]]:
    """Statistic -> (value, rule) of each point."""
    found: dict[str, list[tuple[float, str]]] = {}
    for row in rows:
        found.setdefault(row["statistic"], []).append((float(row["value"]), row["rule"]))
    return found


def test_cusum_restarts_after_a_signal(line: Line) -> None:
    rows, _ = line.play([102, 102, 102, 102, 101], {"kind": "cusum", "k": 0.5, "h": 4})
    # Each 2 adds 1.5: 1.5, 3, 4.5 (beyond 4: from 0 again), 1.5; then 1 adds 0.5. The lower sum
    # would fall by 2.5 each time and stays at zero.
    assert sums(rows) == {
        "upper_sum": [(1.5, ""), (3.0, ""), (4.5, "cusum-upper"), (1.5, ""), (2.0, "")],
        "lower_sum": [(0.0, "")] * 5,
    }


def test_cusum_on_its_limit_does_not_signal(line: Line) -> None:
    rows, _ = line.play([98, 97.5, 99.25], {"kind": "cusum", "k": 0.5, "h": 3.5})
    # Downwards 2 − 0.5, then 2.5 − 0.5: 3.5, on the limit; then 0.75 − 0.5: 3.75.
    assert sums(rows)["lower_sum"] == [(1.5, ""), (3.5, ""), (3.75, "cusum-lower")]


def test_cusum_that_holds_keeps_summing(line: Line) -> None:
    rows, events = line.play(
        [102, 102, 102, 102, 98], {"kind": "cusum", "k": 0.5, "h": 4, "after_signal": "hold"}
    )
    # 1.5, 3, 4.5, 6, then −2 − 0.5: 3.5.
    assert sums(rows)["upper_sum"] == [
        (1.5, ""),
        (3.0, ""),
        (4.5, "cusum-upper"),
        (6.0, "cusum-upper"),
        (3.5, ""),
    ]
    assert [(e["event"], e["subgroup"]["number"]) for e in events] == [("raised", 3)]


def test_cusum_with_a_head_start(line: Line) -> None:
    rows, _ = line.play(
        [102, 101.5, 100, 100], {"kind": "cusum", "k": 0.5, "h": 4, "head_start": 0.5}
    )
    # Both begin at 0.5 × 4 = 2. Upwards: 3.5, 4.5 (beyond: from 2 again), 1.5, 1. Downwards
    # 2 − 2.5: zero, and there it stays: only the side that signalled gets a new head start.
    assert sums(rows) == {
        "upper_sum": [(3.5, ""), (4.5, "cusum-upper"), (1.5, ""), (1.0, "")],
        "lower_sum": [(0.0, "")] * 4,
    }


def test_cusum_clips_its_input(line: Line) -> None:
    rows, _ = line.play([110, 90, 102], {"kind": "cusum", "k": 0.5, "h": 4, "clip": 3})
    # 10 counts as 3, −10 as −3: up 2.5, 0, 1.5; down 0, 2.5, 0.
    assert sums(rows) == {
        "upper_sum": [(2.5, ""), (0.0, ""), (1.5, "")],
        "lower_sum": [(0.0, ""), (2.5, ""), (0.0, "")],
    }


def test_cusum_is_shown_in_the_unit(line: Line) -> None:
    rows, events = line.play(
        [104, 104, 104],
        {"kind": "cusum", "k": 0.5, "h": 4},
        baseline={"mean": 100, "sigma": 2},
        unit="g",
    )
    # In standard errors 1.5, 3, 4.5 as above; one is 2 g.
    upper = [row for row in rows if row["statistic"] == "upper_sum"]
    assert [row["value"] for row in upper] == ["3.0", "6.0", "9.0"]
    assert {(row["centre"], row["lower"], row["upper"]) for row in upper} == {("0.0", "", "8.0")}
    [raised] = events
    assert raised["statistic"] == {
        "name": "upper_sum",
        "value": 9.0,
        "lower": None,
        "upper": 8.0,
        "unit": "g",
    }


def test_cusum_of_one_direction(line: Line) -> None:
    rows, _ = line.play([105, 95, 95], {"kind": "cusum", "k": 0.5, "h": 4, "direction": "down"})
    assert sums(rows) == {"lower_sum": [(0.0, ""), (4.5, "cusum-lower"), (4.5, "cusum-lower")]}


# ── EWMA ─────────────────────────────────────────────────────────────────────────────────────────

# With λ = ½ the variance in squared standard errors is ¼, then ¼ + ¼ · ¼ = 5/16, then
# ¼ + ¼ · 5/16 = 21/64 …, in the long run λ/(2 − λ) = ⅓; two of its roots are 1, 1.118034, 1.145644
# and 1.154701.


def ewma(line: Line, z: list[float], **keys: object) -> list[tuple[float, float, str]]:
    """Distance from the centre, reach of the limits, rule."""
    rows, _ = line.play(
        [100 + each for each in z], {"kind": "ewma", "lambda": 0.5, "width": 2, **keys}
    )
    assert all(float(r["upper"]) - 100 == pytest.approx(100 - float(r["lower"])) for r in rows)
    return [(float(r["value"]) - 100, float(r["upper"]) - 100, r["rule"]) for r in rows]


def about(*rows: tuple[float, float, str]) -> list[tuple[object, object, str]]:
    return [(pytest.approx(v, abs=1e-6), pytest.approx(u, abs=1e-6), rule) for v, u, rule in rows]


def test_ewma_restarts_after_a_signal_its_limits_too(line: Line) -> None:
    # ½ · 1.5; ½ · 1.5 + ½ · 0.75, beyond; then as at the start: ½ · 1.5, held against 1.
    assert ewma(line, [1.5, 1.5, 1.5]) == about(
        (0.75, 1.0, ""), (1.125, 1.118034, "ewma-upper"), (0.75, 1.0, "")
    )


def test_ewma_that_holds(line: Line) -> None:
    # The third is ½ · (−4) + ½ · 1.125; the fourth ½ · (−1.5) + ½ · (−1.4375).
    assert ewma(line, [1.5, 1.5, -4, -1.5], after_signal="hold") == about(
        (0.75, 1.0, ""),
        (1.125, 1.118034, "ewma-upper"),
        (-1.4375, 1.145644, "ewma-lower"),
        (-1.46875, 1.152443, "ewma-lower"),  # ¼ + ¼ · 21/64 = 85/256; 2√ of it
    )


def test_ewma_with_asymptotic_limits(line: Line) -> None:
    # 0.75, 1.125, 1.3125: the third is the first beyond; then from the centre again.
    assert ewma(line, [1.5] * 4, limits="asymptotic") == about(
        (0.75, 1.154701, ""),
        (1.125, 1.154701, ""),
        (1.3125, 1.154701, "ewma-upper"),
        (0.75, 1.154701, ""),
    )


def test_ewma_on_its_limit_does_not_signal(line: Line) -> None:
    # ½ · (−2) is on the limit of 1; ½ · (−1.5) + ½ · (−1) is beyond 1.118034.
    assert ewma(line, [-2, -1.5]) == about((-1.0, 1.0, ""), (-1.25, 1.118034, "ewma-lower"))


def test_ewma_clips_its_input(line: Line) -> None:
    # 10 counts as 1.5.
    assert ewma(line, [10, 10], clip=1.5) == about((0.75, 1.0, ""), (1.125, 1.118034, "ewma-upper"))


def test_ewma_of_one_direction(line: Line) -> None:
    # Downwards alone: what is beyond the upper limit neither signals nor restarts.
    assert ewma(line, [3, -5, -1], direction="down") == about(
        (1.5, 1.0, ""),
        (-1.75, 1.118034, "ewma-lower"),  # ½ · (−5) + ½ · 1.5
        (-0.5, 1.0, ""),
    )
