"""The report's structure: every question answered, nothing lost, nothing fetched, nothing bent.

What is drawn is looked at in test_report_drawn.
"""

from __future__ import annotations

import re
import sys
from collections.abc import Callable
from dataclasses import replace
from functools import cache

import pytest
from plotly.offline import get_plotlyjs
from reading import Element, parsed
from results import FRAGMENT, refused, trustworthy, with_events

from monitor.commandline import CommandError
from replay.tuning.report import page
from replay.tuning.result import Extrapolated, Observed, Range, Result

# The order of the reader's questions is the issue's own.
QUESTIONS = [
    "1. May I trust this recording?",
    "2. What would have rung?",
    "3. How late?",
    "4. What was refused, and why?",
    "5. What do I put in my configuration?",
    "6. How was this worked out?",
]
MADE = pytest.mark.parametrize("made", [trustworthy, refused, with_events])
HOSTILE = '</script><img src=x onerror=alert(1)> & "quotes"'


@cache
def shown(result: Result) -> str:
    """The page without plotly's script, which is not ours and takes long to take apart."""
    return page(result).replace(get_plotlyjs(), "")


def tables(section: Element, column: str) -> list[Element]:
    return [t for t in section.all("table") if column in t.all("thead")[0].text()]


def rows(found: list[Element]) -> list[list[str]]:
    bodies = [table.all("tbody")[0] for table in found]
    return [
        [cell.text() for cell in row.all() if cell.tag in ("th", "td")]
        for body in bodies
        for row in body.all("tr")
    ]


@MADE
def test_the_questions_stand_in_their_order(made: Callable[[], Result]) -> None:
    found = parsed(shown(made()))
    assert [heading.text() for heading in found.all("h2")] == QUESTIONS
    links = [a.attributes["href"] for a in found.all("nav")[0].all("a")]
    assert links == [f"#{s.attributes['id']}" for s in found.all("section")]
    assert found.all("html")[0].attributes["lang"] == "en"
    assert found.all("title")[0].text().startswith("Net weight, 340 g jar")
    assert all(table.all("caption") for table in found.all("table"))
    assert len(found.all("h1")) == 1


@pytest.mark.parametrize("result", [trustworthy(200), refused(), trustworthy(1)])
def test_every_setting_stands_once_in_the_comparison(result: Result) -> None:
    section = parsed(shown(result)).one("rung")
    named = [
        next(part for part in row.all("th")[0].parts if isinstance(part, str))
        for table in tables(section, "Keeps the promise?")
        for row in table.all("tbody")[0].all("tr")
    ]
    assert result.together is not None
    assert named[0] == result.together.name  # what runs today is looked at first
    assert sorted(named[1:]) == sorted(setting.name for setting in result.settings)


def test_two_hundred_settings_leave_few_open_and_a_file_that_can_be_sent() -> None:
    text = page(trustworthy(200))
    section = parsed(text).one("rung")
    folded = sum(len(rows(fold.all("table"))) for fold in section.all("details"))
    shown = len(rows(tables(section, "Keeps the promise?"))) - folded
    assert 8 <= shown <= 16
    assert len(text.encode()) < 8_000_000


def test_what_runs_now_is_always_in_sight() -> None:
    section = parsed(shown(trustworthy(60))).one("rung")
    hidden = {row[0] for fold in section.all("details") for row in rows(fold.all("table"))}
    configured = [s for s in trustworthy(60).settings if s.origin == "configured"]
    assert configured
    assert not [s.name for s in configured if any(s.name in name for name in hidden)]


@MADE
def test_each_delay_stands_beside_its_setting(made: Callable[[], Result]) -> None:
    result = made()
    found = rows(tables(parsed(shown(result)).one("late"), "Floor"))
    assert result.together is not None
    today = [row for row in found if row[0] == result.together.name]
    assert len(today) == len(result.together.delays)
    assert len(found) == len(today) + sum(len(setting.delays) for setting in result.settings)
    # 1.9 · 70 and 70 pieces, 0.6 s each, as results.py puts them into the first setting.
    first = next(row for row in found if row[0] == result.settings[0].name)
    assert first[2] == "70 pieces, 42 s 63 to 80"
    assert first[3] == "133 pieces, 80 s 120 to 153"


def test_the_answer_says_the_best_settings_figures() -> None:
    result = trustworthy()
    said = parsed(shown(result)).all("p", "answer")[0].text()
    assert result.settings[0].name in said
    assert "about 40 days, somewhere from 19 to 84 days" in said
    assert "asked was 14 days" in said
    assert "within 133 pieces of the stream (80 s) nine times in ten" in said


def test_what_runs_today_stands_beside_the_candidates() -> None:
    """As results.py has it: 3 alerts of 7 signals in 26.7 h; rates added up to once in 0.4 days."""
    result = trustworthy()
    found = parsed(shown(result))
    row = rows(tables(found.one("rung"), "Keeps the promise?"))[0]
    name, keeps, seen, counted, by_tail, late = row
    assert "what runs today: cusum, shewhart-mean, cusum-variance" in name
    assert "7 signals in all; one stood open for 1 % of the time" in name
    assert (keeps, seen) == ("✗ no", "3 in 27 h")
    assert counted.startswith("8.9 h")
    assert by_tail == "9.6 h 3.8 to 22 h; rates added up"
    assert late.startswith("177 pieces")
    told = found.all("p", "answer")[0].text()
    assert "What runs now, all of it together, rings once in about 9.6 h" in told
    for name in ("promised", "streams"):
        (plot,) = (p for p in found.all("div", "plot") if p.attributes["id"] == name)
        assert "all configured detectors together" in plot.attributes["aria-label"]


def test_what_the_fragment_would_run_is_what_is_delivered() -> None:
    """The best setting alone is one thing, all that the crew will hear another."""
    result = trustworthy()
    assert result.together is not None
    then = replace(
        result.together,
        name="all of the fragment together",
        observed=Observed(2, 27 * 3_600.0, Range(15_000.0, 274_000.0)),
        extrapolated=Extrapolated(50_000.0, 2.0, Range(25_000.0, 100_000.0)),
        meets=False,
    )
    found = parsed(shown(replace(result, proposed=then)))
    first, second = rows(tables(found.one("rung"), "Keeps the promise?"))[:2]
    assert "what runs today" in first[0]
    assert "what would run with the fragment: cusum, shewhart-mean, cusum-variance" in second[0]
    told = found.all("p", "answer")[0].text()
    assert "All of the fragment together would have rung 2 times in the 27 h" in told
    tiles = found.all("dl", "key")[0].text()
    assert "2 false alarms of all of the fragment in 27 h of the last part" in tiles
    assert "14 h between false alarms of all of the fragment" in tiles
    (plot,) = (p for p in found.all("div", "plot") if p.attributes["id"] == "promised")
    assert "all of the fragment together" in plot.attributes["aria-label"]


def test_without_a_baseline_nothing_runs_today() -> None:
    found = parsed(shown(replace(trustworthy(), together=None)))
    assert "together" not in rows(tables(found.one("rung"), "Keeps"))[0][0]
    assert "What runs now" not in found.all("p", "answer")[0].text()


def test_what_is_asked_of_a_part_is_said() -> None:
    result = trustworthy()
    best = replace(result.settings[0], asked=3 * 14 * 86_400.0)
    spread = replace(result.settings[3], unranked="", rank=1)
    settings = (best, *result.settings[1:3], spread, *result.settings[4:])
    found = parsed(shown(replace(result, settings=settings, best_spread=3)))
    told = found.all("p", "answer")[0].text()
    assert "asked was 42 days, its part of one in 14 days for all detectors" in told
    assert f"For the spread, {spread.name} goes beside it." in told
    marks = {row[0].split()[0]: row for row in rows(tables(found.one("rung"), "Keeps"))}
    assert marks[best.name][1] == "✓ yes, take it rank 1; asked: one in 42 days"
    assert marks[spread.name][1] == "✓ yes, take it rank 1 for the spread"
    assert marks[spread.name][5].endswith("of a spread 1.5 times as wide")


def test_an_interval_beyond_the_recording_is_told_as_a_bound() -> None:
    result = trustworthy()
    best = result.settings[0]
    assert best.extrapolated is not None
    bound = replace(best.extrapolated, interval=replace(best.extrapolated.interval, high=None))
    settings = (replace(best, extrapolated=bound), *result.settings[1:])
    found = parsed(shown(replace(result, settings=settings)))
    assert "rings once in at least 19 days" in found.all("p", "answer")[0].text()
    (cells,) = (row for row in rows(tables(found.one("rung"), "Keeps")) if best.name in row[0])
    assert cells[4].startswith("at least 19 days")


@pytest.mark.parametrize(
    ("trusted", "with_care", "badge"),
    [
        (True, False, "✓ May be trusted"),
        (True, True, "! With care"),
        (False, False, "✗ May not be trusted"),
    ],
)
def test_the_badge_says_what_the_sentence_says(trusted: bool, with_care: bool, badge: str) -> None:
    result = replace(trustworthy(), trusted=trusted, with_care=with_care)
    found = parsed(shown(result)).all("p", "verdict")[0].text()
    assert found.startswith(badge)


def test_a_detector_that_stays_and_breaks_the_promise_is_named_at_the_top() -> None:
    plain = trustworthy()
    assert "Caution:" not in parsed(shown(plain)).all("p", "answer")[0].text()
    one = replace(plain, breaking=("shewhart-mean",))
    said = parsed(shown(one)).all("p", "answer")[0].text()
    assert "Caution: shewhart-mean stays as configured and rings more often than asked" in said


def test_what_is_left_open_is_no_failure() -> None:
    """Of the fifth setting 5 alarms in 27 h are seen; of the other, none contradicts 14 days."""
    result = trustworthy()
    quiet = replace(result.settings[0], meets=False, rank=None, unranked="too short", name="quiet")
    found = parsed(shown(replace(result, settings=(*result.settings[1:], quiet), best=None)))
    marks = {row[0].split()[0]: row[1] for row in rows(tables(found.one("rung"), "Keeps the"))}
    assert marks["quiet"].startswith("? not shown")
    assert marks["ewma-mean-5-5"].startswith("✗ no")


def test_without_delays_the_page_says_why_there_are_none() -> None:
    result = trustworthy()
    settings = tuple(replace(each, delays=(), curve=()) for each in result.settings)
    section = parsed(shown(replace(result, settings=settings))).one("late")
    assert section.text().endswith("The recording is too short to tell.")


def test_what_the_configuration_replaces_and_keeps_stands_above_it() -> None:
    section = parsed(shown(trustworthy())).one("configuration").text()
    note, *_ = trustworthy().notes
    assert section.index(note) < section.index(FRAGMENT.split()[0])


def test_refusals_say_what_why_and_what_instead() -> None:
    result = refused()
    found = parsed(shown(result))
    table = rows(tables(found.one("refused"), "Refused"))
    assert table == [
        [text[0].upper() + text[1:] for text in (refusal.what, refusal.why, refusal.instead)]
        for refusal in result.refusals
    ]
    assert "✗ May not be trusted" in found.all("p", "verdict")[0].text()
    assert result.trust in found.all("p", "verdict")[0].text()
    assert result.refusals[0].instead in found.all("p", "answer")[0].text()


def test_settings_left_out_of_the_ranking_are_counted_by_reason() -> None:
    found = rows(tables(parsed(shown(trustworthy(200))).one("refused"), "How many"))
    reason = "The lower end of its interval is shorter than the promise"
    assert [row[:2] for row in found] == [[reason, "195"]]


def test_the_configuration_is_handed_over_unchanged() -> None:
    (pre,) = parsed(shown(trustworthy())).one("configuration").all("pre")
    (code,) = pre.all("code")
    assert code.parts == [FRAGMENT]


def test_without_a_best_setting_there_is_nothing_to_copy() -> None:
    section = parsed(shown(refused())).one("configuration")
    assert not section.all("pre")
    assert "Keep what runs now" in section.text()


def test_events_are_scored_only_where_there_are_some() -> None:
    assert "labelled event" not in parsed(shown(trustworthy())).one("rung").text()
    found = rows(tables(parsed(shown(with_events())).one("rung"), "Real causes"))
    assert len(found) == len(with_events().settings)
    assert found[0][1:] == ["9 of 9", "41 s", "2.2 min", "12 of 14"]
    assert found[5][1:] == ["0 of 9", "–", "–", "14 of 14"]


@MADE
def test_the_page_fetches_nothing(made: Callable[[], Result]) -> None:
    found = parsed(shown(made()))
    for element in found.all():
        for key in {"src", "href", "srcset", "data", "action", "poster"} & set(element.attributes):
            assert element.attributes[key].startswith("#"), (element.tag, element.attributes)
    (style,) = found.all("style")
    assert not re.search(r"url\(|@import|https?:", style.text())
    (policy,) = (m for m in found.all("meta") if "http-equiv" in m.attributes)
    assert policy.attributes["content"].startswith("default-src 'none';")
    assert "http" not in policy.attributes["content"]


def test_texts_from_outside_stay_texts() -> None:
    plain = with_events()
    streams = (replace(plain.streams[0], stream=f"head={HOSTILE}"), *plain.streams[1:])
    refusals = (replace(plain.refusals[0], what=HOSTILE),)
    hostile = replace(
        plain,
        title=HOSTILE,
        unit=f"g{HOSTILE}",
        trust=HOSTILE,
        characteristic=HOSTILE,
        sources=(replace(plain.sources[0], name=HOSTILE),),
        set_aside=((HOSTILE, 1),),
        streams=streams,
        groupings=tuple(replace(g, said=HOSTILE) for g in plain.groupings),
        settings=tuple(
            replace(s, name=f"{n} {HOSTILE}", unranked=HOSTILE if s.unranked else "")
            for n, s in enumerate(plain.settings)
        ),
        refusals=refusals,
        fragment=f"title: {HOSTILE}\n",
    )
    found = parsed(shown(hostile))
    assert not found.all("img")
    assert len(found.all("script")) == len(parsed(shown(plain)).all("script"))
    assert HOSTILE in found.all("h1")[0].text()
    assert HOSTILE in found.one("refused").text()
    assert found.one("configuration").all("code")[0].parts == [f"title: {HOSTILE}\n"]


def test_charts_say_their_figures_in_words() -> None:
    result = trustworthy()
    said = {
        plot.attributes["id"]: plot.attributes["aria-label"]
        for plot in parsed(shown(result)).all("div", "plot")
    }
    assert set(said) >= {"wander", "promised", "streams", "median-curve", "late-curve", "price"}
    assert "Asked: one false alarm in 14 days" in said["promised"]
    assert "cusum-mean-1-0: counted at least 9 h (none seen; 95 %)" in said["promised"]
    assert "ewma-mean-5-1: 1 false alarm;" in said["streams"]
    assert "1.5\u00a0g 133 pieces" in said["late-curve"]
    assert "keeps to its centre" in said["wander"]


def test_without_plotly_it_says_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "plotly", None)
    with pytest.raises(CommandError, match=r"pip install 'driftbell\[report\]'"):
        page(trustworthy())
