"""The report's figures: digits people use, ranges with one unit, the line that was fitted."""

from __future__ import annotations

import html
import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from results import HEADS, trustworthy

from replay.tuning.report import chosen, markup, words
from replay.tuning.report.charts import look, outlines, tails
from replay.tuning.result import Observed, Outline, Quantile, Range, StreamFound, Tail


@pytest.mark.parametrize(
    ("low", "high", "said"),
    [
        ("9 days", "48 days", "9 to 48 days"),
        ("11 h", "2.7 days", "11 h to 2.7 days"),
        ("5 min", "5 min", "5 min"),
        ("63", "80", "63 to 80"),
    ],
)
def test_a_range_names_its_unit_once(low: str, high: str, said: str) -> None:
    assert words.between(low, high) == said


@pytest.mark.parametrize(
    ("value", "spread", "said"),
    [
        (341.2049, 1.9, "341.20"),
        (341.2049, 19.0, "341.2"),
        (2.05123, 0.011, "2.0512"),
        (12_345.6, 500, "12346"),
        (341.2, 0.0, "341.200"),
    ],
)
def test_a_level_is_told_to_a_hundredth_of_its_spread(
    value: float, spread: float, said: str
) -> None:
    assert words.level(value, spread) == said


def test_a_delay_that_not_all_had_is_told_by_how_long_was_waited() -> None:
    assert words.pieces(Quantile(None, None), 3_000) == "not within 3,000 pieces"
    # Two digits would write 99.6 as 1e+02.
    assert words.pieces(Quantile(99.6, None), 3_000) == "100 pieces"


def test_a_count_of_none_is_a_bound() -> None:
    assert words.counted(Observed(0, 90_000, Range(30_000, None)))[0] == "at least 8.3 h"
    assert words.counted(Observed(3, 90_000, None)) == ("not given", "its centre does not stay")


@given(st.floats(0, 60), st.floats(1, 20), st.floats(0.2, 5))
def test_the_line_of_sums_falls_by_e_in_each_scale(
    above: float, threshold: float, scale: float
) -> None:
    tail = Tail((1.0,), (0.1,), 9.0, threshold, 2e-3, scale, "level")
    expected = 2e-3 * math.exp(-above / scale)
    assert tails.rate_at(tail, threshold + above) == pytest.approx(expected, rel=1e-6, abs=1e-300)


@given(st.floats(3, 5), st.floats(0.5, 2), st.sampled_from([0.1, 0.5, 1.0]))
def test_the_line_of_averages_falls_nearly_as_half_the_square(
    threshold: float, above: float, weight: float
) -> None:
    tail = Tail((1.0,), (0.1,), 9.0, threshold, 2e-3, 1.0, "square", weight)
    fallen = math.log(2e-3 / tails.rate_at(tail, threshold + above))
    half_square = ((threshold + above) ** 2 - threshold**2) / 2
    assert fallen == pytest.approx(half_square, rel=0.15)


@given(st.floats(0.5, 1e10), st.floats(1.5, 1e6))
def test_an_axis_of_durations_is_never_crowded(low: float, reach: float) -> None:
    ticks = look.durations(low, low * reach)
    assert len(ticks["tickvals"]) == len(ticks["ticktext"]) <= 6
    assert all(low <= tick <= low * reach for tick in ticks["tickvals"])


def test_of_many_streams_those_with_alarms_are_drawn() -> None:
    few = trustworthy()
    quiet = tuple(StreamFound(f"head={n}", 10, few.streams[0].outline) for n in range(40))
    line = few.groupings[0].baselines[0]
    groupings = tuple(
        replace(
            grouping,
            baselines=(
                *(replace(line, stream=stream.stream, mean_proof=line.mean) for stream in quiet),
                *grouping.baselines,
            ),
        )
        for grouping in few.groupings
    )
    many = replace(few, streams=(*quiet, *few.streams), groupings=groupings)
    drawn = [many.streams[place].stream for place in chosen.streams(many)]
    rung = {alarm.stream for setting in chosen.few(many) for alarm in setting.alarms}
    assert len(drawn) == 8
    assert rung == set(HEADS)
    assert rung < set(drawn)
    assert drawn == [stream.stream for stream in many.streams if stream.stream in drawn]


@given(st.text())
def test_any_text_comes_back_from_its_html(text: str) -> None:
    assert html.unescape(markup.inline(text)).replace("\u00a0", " ") == text.replace("\u00a0", " ")
    assert "<" not in markup.inline(text)


def test_a_pause_breaks_the_line_and_the_band() -> None:
    times = (0, 10, 20, 90, 100)
    outline = Outline(times, (1.0, 2.0, 3.0, 4.0, 5.0), (0.0,) * 5, (9.0,) * 5)
    _, means = outlines.line(outline)
    assert means == [1.0, 2.0, 3.0, None, 4.0, 5.0, None]
    edge = outlines.band(outline).y
    assert list(edge) == [9.0] * 3 + [0.0] * 3 + [None] + [9.0] * 2 + [0.0] * 2 + [None]
