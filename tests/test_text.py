"""Sentences, read as a technician reads them at three in the morning.

The figures are the demo line's: net weight in subgroups of five, standard error 0.94 g.
"""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import (
    GAUGE,
    START,
    characteristic,
    engine,
    events,
    fold,
    message,
    reading,
    readings,
    shewhart,
)

from monitor import text
from monitor.detectors import Signal
from monitor.detectors.charts import standard_error
from monitor.lookback import Shift
from monitor.messages import EventKind
from monitor.plan import (
    ByCount,
    CharacteristicPlan,
    CusumPlan,
    EwmaPlan,
    Judged,
    RulePlan,
    SourcePlan,
    Stream,
)
from monitor.times import DAY, SECOND

LANES = replace(GAUGE, topic="jar/{lane}", captures=((1, "lane"),), stream=(("head", ("head",)),))
WEIGHT = characteristic(source=LANES, size=5, mean=341.2, sigma=1.9, sigma_between=0.4)
TORQUE = characteristic(
    title="Capping torque",
    unit="N·m",
    source=SourcePlan(topic="cap", captures=(), payload="number"),
    size=5,
    mean=2.05,
    sigma=0.11,
)
GLUE = characteristic(title="Glue temperature", unit="°C", mean=165.0, sigma=1.2)
HEAD_4 = (("head", "4"), ("lane", "1"))

SINCE = START - 24 * SECOND
RISE = Shift(1.7, SINCE, SINCE - 9 * SECOND, SINCE + 9 * SECOND)
FALL = Shift(-2.5, SINCE, SINCE - 9 * SECOND, SINCE + 9 * SECOND)
# Their sizes are in standard errors here, which differ from plan to plan; a finding's are in units.


def say(
    plan: CharacteristicPlan,
    signal: Signal,
    shift: Shift | None = None,
    event: EventKind = "raised",
    chart: str = "mean",
    reason: str | None = None,
) -> str:
    stream = HEAD_4 if plan is WEIGHT else ()
    return text.sentence(
        judged(plan, stream), event, finding(plan, signal, chart, shift), START, reason
    )


def judged(plan: CharacteristicPlan, stream: Stream = ()) -> Judged:
    assert plan.judgement is not None
    return Judged(plan, stream, plan.judgement.baseline)


def finding(
    plan: CharacteristicPlan, signal: Signal, chart: str, shift: Shift | None
) -> text.Finding:
    assert isinstance(plan.subgroup, ByCount)
    error = standard_error(judged(plan).baseline, plan.subgroup.size)
    if shift is not None:
        shift = shift._replace(size=shift.size * error)
    return text.Finding(signal, chart, shift, error)


UPPER_SUM = Signal("cusum-upper", "up", "upper_sum", 10.5, None, 10.4)
LOWER_SUM = Signal("cusum-lower", "down", "lower_sum", 0.312, None, 0.246)
ABOVE = Signal("outside-upper", "up", "mean", 345.55, 336.98, 345.42)
BELOW = Signal("outside-lower", "down", "mean", 1.874, 1.902, 2.198)
RANGE = Signal("outside-upper", None, "range", 9.93, 0.0, 9.34)
CLOSE = Signal("outside-lower", None, "range", 0.02, 0.03, 9.34)
MOVED = Signal("outside-upper", None, "moving_range", 4.6, 0.0, 4.42)
WIDE = Signal("outside-upper", None, "variance", 17.9, 0.1, 16.07)
NARROW = Signal("outside-lower", None, "variance", 0.0044, 0.0062, 16.07)
WIDER = Signal("cusum-upper", None, "upper_sum", 45.21, None, 43.32, 9, 0, 1.583, RISE.onset)
TIGHT = Signal("cusum-lower", None, "lower_sum", 0.0411, None, 0.0403, 9, 0, 0.446, RISE.onset)
STUCK = Signal("cusum-lower", None, "lower_sum", 24.0, None, 23.1, 9, 0, 0.0, START - DAY)
ZONE = Signal("zone-lower", "down", "mean", 339.12, 339.32, 343.08, 3, 2)
RUN = Signal("run-upper", "up", "individual", 165.7, 161.4, 168.6, 9)
FALLING = Signal("trend-down", "down", "mean", 339.9, 338.38, 344.02, 6)
ALTERNATING = Signal("alternation", None, "mean", 341.9, 338.38, 344.02, 14)
CLOSE_IN = Signal("stratification", None, "mean", 341.31, 340.26, 342.14, 15)
APART = Signal("mixture", None, "mean", 343.31, 340.26, 342.14, 8)
AVERAGE = Signal("ewma-lower", "down", "mean", 1.985, 1.9942, 2.1058)


@pytest.mark.parametrize(
    ("said", "words"),
    [
        (
            say(WEIGHT, UPPER_SUM, RISE),
            "Net weight, lane 1 head 4, has risen by about 1.6 g since about 06:40:48 UTC "
            "(upper sum 10.50 g, limit 10.40 g).",
        ),
        (
            say(TORQUE, LOWER_SUM, FALL),
            "Capping torque has fallen by about 0.12 N·m since about 06:40:48 UTC "
            "(lower sum 0.312 N·m, limit 0.246 N·m).",
        ),
        (
            say(WEIGHT, ABOVE, RISE._replace(onset=START - DAY)),
            "Net weight, lane 1 head 4, has risen by about 1.6 g since about 2026-03-01 06:41:12 "
            "UTC (mean 345.55 g, limit 345.42 g).",
        ),
        (
            say(TORQUE, BELOW, FALL._replace(earliest=None)),
            "Capping torque has fallen by about 0.12 N·m since about 06:40:48 UTC or earlier "
            "(mean 1.874 N·m, limit 1.902 N·m).",
        ),
        (
            say(WEIGHT, RANGE, None, chart="range"),
            "Net weight, lane 1 head 4, varies more than usual (range 9.93 g, limit 9.34 g).",
        ),
        (
            say(WEIGHT, CLOSE, None, chart="range"),
            "Net weight, lane 1 head 4, varies less than usual (range 0.02 g, limit 0.03 g).",
        ),
        (
            say(GLUE, MOVED, None, chart="moving_range"),
            "Glue temperature varies more than usual (moving range 4.6 °C, limit 4.4 °C).",
        ),
        (
            say(WEIGHT, WIDE, None, chart="variance"),
            "Net weight, lane 1 head 4, varies more than usual (variance 17.9 g², limit 16.1 g²).",
        ),
        (
            say(WEIGHT, NARROW, None, chart="variance"),
            "Net weight, lane 1 head 4, varies less than usual "
            "(variance 0.0044 g², limit 0.0062 g²).",
        ),
        (
            say(WEIGHT, WIDER, None, chart="variance"),
            "Net weight, lane 1 head 4, varies more than usual: about 1.6 times its usual spread "
            "since about 06:40:48 UTC (upper sum 45.2 g², limit 43.3 g²).",
        ),
        (
            say(WEIGHT, WIDER, None, "rejoined", chart="variance"),
            "Net weight, lane 1 head 4, varies more than usual again: about 1.6 times its usual "
            "spread since about 06:40:48 UTC (upper sum 45.2 g², limit 43.3 g²).",
        ),
        (
            say(TORQUE, TIGHT, None, chart="variance"),
            "Capping torque varies less than usual: about 0.45 times its usual spread "
            "since about 06:40:48 UTC (lower sum 0.041 (N·m)², limit 0.040 (N·m)²).",
        ),
        (
            say(WEIGHT, STUCK, None, chart="variance"),
            "Net weight, lane 1 head 4, varies less than usual: hardly at all since about "
            "2026-03-01 06:41:12 UTC (lower sum 24.0 g², limit 23.1 g²).",
        ),
        (
            say(WEIGHT, ZONE, FALL),
            "Net weight, lane 1 head 4, has fallen by about 2.3 g since about 06:40:48 UTC "
            "(2 of the last 3 means below 339.32 g, the latest 339.12 g).",
        ),
        (
            say(GLUE, RUN, RISE, chart="individual"),
            "Glue temperature has risen by about 2.0 °C since about 06:40:48 UTC "
            "(9 values in a row above 165.0 °C, the latest 165.7 °C).",
        ),
        (
            say(WEIGHT, FALLING, FALL),
            "Net weight, lane 1 head 4, has fallen by about 2.3 g since about 06:40:48 UTC "
            "(6 means in a row falling, the latest 339.90 g).",
        ),
        (
            say(WEIGHT, ALTERNATING),
            "Net weight, lane 1 head 4, goes up and down by turns "
            "(14 means in a row, the latest 341.90 g).",
        ),
        (
            say(WEIGHT, CLOSE_IN),
            "Net weight, lane 1 head 4, keeps closer to its centre than usual "
            "(15 means in a row within 340.26 to 342.14 g, the latest 341.31 g).",
        ),
        (
            say(WEIGHT, APART),
            "Net weight, lane 1 head 4, keeps away from its centre, as if two sources were mixed "
            "(8 means in a row outside 340.26 to 342.14 g, the latest 343.31 g).",
        ),
        (
            say(TORQUE, AVERAGE, FALL),
            "Capping torque has fallen by about 0.12 N·m since about 06:40:48 UTC "
            "(weighted average 1.985 N·m, limit 1.994 N·m).",
        ),
        (
            say(WEIGHT, ABOVE, RISE, "updated"),
            "Net weight, lane 1 head 4, has risen by about 1.6 g since about 06:40:48 UTC "
            "(now also: mean 345.55 g, limit 345.42 g).",
        ),
        (
            say(WEIGHT, UPPER_SUM, RISE, "rejoined"),
            "Net weight, lane 1 head 4, has risen again, by about 1.6 g since about 06:40:48 UTC "
            "(upper sum 10.50 g, limit 10.40 g).",
        ),
        (
            say(WEIGHT, RANGE, None, "rejoined", "range"),
            "Net weight, lane 1 head 4, varies more than usual again (range 9.93 g, limit 9.34 g).",
        ),
        # The estimate says nothing of a rise: then neither does the sentence.
        (
            say(WEIGHT, UPPER_SUM, FALL),
            "Net weight, lane 1 head 4, has risen (upper sum 10.50 g, limit 10.40 g).",
        ),
        (
            say(WEIGHT, UPPER_SUM, RISE, "returned-to-normal"),
            "Net weight, lane 1 head 4, has returned to normal: the rise is over.",
        ),
        (
            say(TORQUE, LOWER_SUM, FALL, "returned-to-normal"),
            "Capping torque has returned to normal: the fall is over.",
        ),
        (
            say(WEIGHT, RANGE, None, "returned-to-normal", "range"),
            "Net weight, lane 1 head 4, has returned to normal: it varies as usual.",
        ),
        (
            say(WEIGHT, APART, None, "returned-to-normal"),
            "Net weight, lane 1 head 4, has returned to normal: the pattern is gone.",
        ),
        (
            say(WEIGHT, UPPER_SUM, RISE, "withdrawn", reason="gauge-restart"),
            "Net weight, lane 1 head 4, is judged afresh because the gauge restarted: "
            "what was reported may still be there.",
        ),
    ],
)
def test_a_technician_understands_it(said: str, words: str) -> None:
    assert said == words


def test_a_value_just_beyond_its_limit_is_shown_to_be_so() -> None:
    said = say(TORQUE, BELOW._replace(value=1.90184, lower=1.90215), FALL)
    assert said.endswith("(mean 1.9018 N·m, limit 1.9022 N·m).")


@pytest.mark.parametrize(
    ("size", "amount"),
    [(1.6, "1.6"), (0.957, "0.96"), (12.34, "12"), (1234.0, "1200"), (0.00123, "0.0012")],
)
def test_a_size_has_two_digits_and_no_exponent(size: float, amount: str) -> None:
    plan = characteristic(unit="g")
    shift = Shift(size, SINCE, SINCE, SINCE)
    assert f"has risen by about {amount} g since" in text.sentence(
        judged(plan), "raised", finding(plan, ABOVE, "individual", shift), START
    )


@pytest.mark.parametrize(
    ("title", "subject"),
    [
        ("Net weight, 340 g jar", "Net weight"),
        ("Fill height", "Fill height"),
        (", 340 g jar", "weight"),
        ("Net weight , filled", "Net weight"),
    ],
)
def test_the_subject_is_the_title_up_to_its_first_comma(title: str, subject: str) -> None:
    assert text.subject(judged(characteristic(title=title))) == subject


def test_stream_keys_stand_in_the_order_they_were_declared_in() -> None:
    assert text.subject(judged(WEIGHT, HEAD_4)) == "Net weight, lane 1 head 4,"


def test_without_a_unit_no_space_is_left() -> None:
    plan = characteristic(unit="", title="Count")
    said = text.sentence(judged(plan), "raised", finding(plan, ABOVE, "individual", RISE), START)
    assert (
        said == "Count has risen by about 1.7 since about 06:40:48 UTC (value 345.6, limit 345.4)."
    )


def test_what_the_engine_raises_reads_as_one_story() -> None:
    plan = replace(
        WEIGHT,
        source=replace(LANES, topic="jar/+"),
        judgement=characteristic(
            CusumPlan("mean", 0.5, 5.0),
            shewhart(chart="mean"),
            EwmaPlan("mean", 0.2, 2.962),
            shewhart(chart="range"),
            size=5,
            mean=341.2,
            sigma=1.9,
            sigma_between=0.4,
        ).judgement,
        off_delay=30 * SECOND,
    )
    usual = [341.2, 341.0, 341.4, 341.2, 341.2]
    risen = [343.1, 342.8, 343.3, 343.0, 343.2]
    values = usual * 6 + risen * 5 + [347, 342, 349, 339, 346] + usual * 16 + [344.6] * 5
    entries = [replace(reading(v, n, n, head=4), topic="jar/1") for n, v in enumerate(values)]
    told = events(fold(engine(plan), entries))
    assert [f"{e['time'][11:19]} {e['text']}" for e in told] == [
        "06:42:01 Net weight, lane 1 head 4, has risen by about 1.9 g since about 06:41:42 UTC "
        "(upper sum 5.64 g, limit 4.70 g).",
        "06:42:11 Net weight, lane 1 head 4, has risen by about 2.1 g since about 06:41:42 UTC "
        "(now also: mean 344.60 g, limit 344.02 g).",
        "06:42:11 Net weight, lane 1 head 4, varies more than usual (range 10.00 g, limit 9.34 g).",
        "06:42:41 Net weight, lane 1 head 4, has returned to normal: the rise is over.",
        "06:42:41 Net weight, lane 1 head 4, has returned to normal: it varies as usual.",
        "06:43:36 Net weight, lane 1 head 4, has risen again, by about 3.4 g since about "
        "06:43:32 UTC (mean 344.60 g, limit 344.02 g).",
    ]


sizes = st.floats(1e-100, 1e100)
extremes = st.sampled_from([0.0, 5e-324, -5e-324, 1e100, -1e100, 1e12, 999_999_999_999.9])


@given(st.floats(-1e100, 1e100) | extremes, st.floats(-1e100, 1e100), sizes, sizes)
def test_any_figures_make_a_short_sentence(
    value: float, limit: float, size: float, sigma: float
) -> None:
    plan = characteristic(sigma=sigma)
    shift = Shift(size, START, None, START)
    signal = Signal("outside-upper", "up", "individual", value, -limit, limit, 3, 2)
    for rule in ("outside-upper", "zone-upper", "run-upper", "trend-up"):
        said = text.sentence(
            judged(plan),
            "raised",
            finding(plan, signal._replace(rule=rule), "individual", shift),
            START,
        )
        assert said.startswith("Net weight has risen")
        assert len(said) < 200


def test_values_too_small_for_their_spread_are_no_error() -> None:
    plan = characteristic(shewhart(RulePlan("run", length=2)), sigma=1e-3)
    (event,) = events(fold(engine(plan), readings([5e-324, 5e-324])))
    assert event["text"].startswith("Net weight has risen")


def test_a_stream_value_is_shown_as_it_is() -> None:
    source = SourcePlan("a/+", ((1, "lane"),), "number")
    entry = replace(message(b"9"), topic="a/{x} %s")
    (event,) = events(engine(characteristic(source=source)).fold(entry))
    assert event["text"].startswith("Net weight, lane {x} %s, has risen by about 9.0 g")
