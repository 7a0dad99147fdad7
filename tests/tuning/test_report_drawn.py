"""The report in a real browser: every chart is drawn, and no script stumbles."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import pytest
from browsers import chromium_path, opened
from plotly.offline import get_plotlyjs
from reading import Element, parsed
from results import refused, with_events

from replay.tuning.report import page
from replay.tuning.result import Result, StreamFound

pytestmark = pytest.mark.skipif(chromium_path() is None, reason="chromium is not on PATH")


def browsed(text: str, folder: Path) -> tuple[Element, list[str]]:
    path = folder / "report.html"
    path.write_text(text)
    dom, console = opened(path, folder / "profile")
    return parsed(dom.replace(get_plotlyjs(), "")), console


def drawn(found: Element) -> dict[str, int]:
    """For each chart: how many of its traces the browser drew."""
    return {
        plot.attributes["id"]: len(plot.all("g", "trace"))
        for plot in found.all("div", "plot")
        if plot.all("svg", "main-svg")
    }


def bare() -> Result:
    """One unnamed stream, nothing tried, too short to tell anything."""
    whole = refused()
    grouping = whole.groupings[0]
    wander = replace(grouping.wander, lengths=(), ratios=(), growth=None, wanders=False)
    line = replace(grouping.baselines[0], stream="")
    return replace(
        whole,
        unit="",
        resolution=None,
        set_aside=(),
        streams=(StreamFound("", 40, whole.streams[0].outline),),
        groupings=(replace(grouping, baselines=(line,), wander=wander),),
        settings=(),
    )


def named_badly(result: Result) -> Result:
    settings = tuple(
        replace(setting, name=f"<b>{place}</b> & %{{y}} </script>")
        for place, setting in enumerate(result.settings)
    )
    return replace(result, settings=settings)


@pytest.mark.parametrize(
    ("result", "least"),
    [
        (
            named_badly(with_events()),
            {
                "wander": 2,
                "promised": 18,  # nine settings counted; eight of them have a tail; the legend
                "streams": 17,  # six bands and six means, alarms of five settings
                "median-curve": 4,
                "late-curve": 4,
                "price": 3,
                "tail-0": 2,
                "tail-3": 2,
            },
        ),
        (refused(), {"wander": 2, "streams": 17}),
        (bare(), {"streams": 2}),
    ],
    ids=["everything", "refused", "bare"],
)
def test_every_chart_is_drawn(result: Result, least: dict[str, int], tmp_path: Path) -> None:
    text = page(result)
    asked = set(re.findall(r'<div class="plot" role="img" id="([^"]+)"', text))
    found, console = browsed(text, tmp_path)
    assert console == []
    assert not found.all("p", "failed")
    traces = drawn(found)
    assert set(traces) == asked >= set(least)
    assert {name: traces[name] for name in least if traces[name] < least[name]} == {}
    labels = " ".join(e.text() for plot in found.all("div", "plot") for e in plot.all("text"))
    if result.settings and "<b>" in result.settings[0].name:
        assert "<b>0</b> & %{y} </script>" in labels


def test_a_chart_that_fails_says_so_and_spares_the_others(tmp_path: Path) -> None:
    text = page(refused())
    start = text.index('id="wander-data">') + len('id="wander-data">')
    found, _ = browsed(text[:start] + "!" + text[start:], tmp_path)
    (failed,) = found.all("p", "failed")
    assert "could not be drawn" in failed.text()
    assert "streams" in drawn(found)
