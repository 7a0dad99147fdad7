"""From documents to keys, values, times and numbers, one check at a time."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plans import GAUGE, START

from monitor.decode import FUTURE, Decoder, RowDecoder, judge_sequence, judge_time
from monitor.entries import Reading
from monitor.plan import SourcePlan
from monitor.pointers import MISSING
from monitor.times import SECOND

CHECKWEIGHER = SourcePlan(
    topic="line/+/weight",
    captures=((1, "lane"),),
    payload="json",
    value=("net",),
    time=("t",),
    stream=(("head", ("head",)), ("cup", ("cup", "0"))),
    use_if=((("verdict",), ("accept", 1)), (("on",), (True, None))),
    plausible_lower=0.0,
    plausible_upper=1000.0,
)
USED = {"verdict": "accept", "on": True, "head": 4, "cup": ["c"], "net": 341.6, "t": 7}


Found = tuple[tuple[str, ...], object, object]


def look(decoder: Decoder, document: object, topic: str) -> Found | str:
    """Stream values, value and time as the engine asks for them, or the reason to set it aside."""
    if not decoder.is_used(document):
        return "not-used"
    keys = decoder.stream_values(document, decoder.levels(topic))
    _, value, at, _ = decoder.find(document)
    return "no-stream" if keys is None else (keys, value, at)


def find(**changes: object) -> Found | str:
    document = {key: value for key, value in (USED | changes).items() if value is not MISSING}
    return look(Decoder(CHECKWEIGHER), document, "line/1/weight")


def test_keys_are_sorted_wherever_their_values_stand() -> None:
    assert Decoder(CHECKWEIGHER).keys == ("cup", "head", "lane")
    assert find() == (("c", "4", "1"), 341.6, 7)


@pytest.mark.parametrize(
    ("changes", "used"),
    [
        ({"verdict": 1}, True),
        ({"verdict": 1.0}, True),
        ({"verdict": True}, False),  # 1 in Python, not in JSON
        ({"verdict": "1"}, False),
        ({"verdict": "Accept"}, False),
        ({"verdict": None}, False),
        ({"verdict": MISSING}, False),
        ({"verdict": ["accept"]}, False),
        ({"on": None}, True),
        ({"on": MISSING}, False),
        ({"on": 1}, False),
        ({"on": "true"}, False),
    ],
)
def test_use_if_takes_json_values_for_what_they_are(changes: dict[str, object], used: bool) -> None:
    assert (find(**changes) != "not-used") is used


@pytest.mark.parametrize(
    ("head", "text"),
    [
        ("4", "4"),
        (4, "4"),
        (4.0, "4"),
        (-0.0, "0"),
        (4.5, "4.5"),
        (10**15, "1000000000000000"),
        ("a b/+#%ü", "a b/+#%ü"),
        ("x" * 256, "x" * 256),
        ("x" * 257, None),
        ("", None),
        (True, None),
        (None, None),
        (MISSING, None),
        ({}, None),
        (["4"], None),
        (math.nan, None),
        (math.inf, None),
        (10**30, None),
        ("\ud800", None),  # half of a surrogate pair, which no topic can carry
    ],
)
def test_a_stream_value_is_a_text_or_a_number(head: object, text: str | None) -> None:
    found = find(head=head)
    assert found == "no-stream" if text is None else (found[0][1] == text)


def test_an_empty_topic_level_is_no_stream() -> None:
    decoder = Decoder(CHECKWEIGHER)
    assert look(decoder, USED, "line//weight") == "no-stream"


def test_a_row_of_a_table_needs_every_key() -> None:
    decoder = RowDecoder(CHECKWEIGHER)

    def streams(**columns: str) -> tuple[str, ...] | None:
        return decoder.stream_values(Reading(0, "weight", columns, 341.6), ())

    assert streams(lane="1", head="4", cup="c", spare="x") == ("c", "4", "1")
    assert streams(lane="1", head="4") is None
    assert streams(lane="1", head="4", cup="") is None


@pytest.mark.parametrize(
    ("value", "judged"),
    [
        (MISSING, "no-value"),
        (None, "no-value"),
        ("abc", "not-a-number"),
        (True, "not-a-number"),
        ([], "not-a-number"),
        (math.nan, "not-finite"),
        (math.inf, "not-finite"),
        ("1e999", "not-finite"),
        (10**400, "not-finite"),
        (-0.001, "implausible"),
        (1000.1, "implausible"),
        ("-1", "implausible"),
        (0, 0.0),
        (1000, 1000.0),
        ("341.6", 341.6),
    ],
)
def test_a_value_is_plausible_or_has_a_reason(value: object, judged: float | str) -> None:
    assert Decoder(CHECKWEIGHER).judge_value(value) == judged


def test_without_a_plausible_range_only_the_absurd_is_implausible() -> None:
    decoder = Decoder(GAUGE)
    assert decoder.judge_value(-1e100) == -1e100
    assert decoder.judge_value(1.1e100) == "implausible"


def test_a_pointer_to_the_whole_document_reads_a_plain_number() -> None:
    decoder = Decoder(replace(GAUGE, value=(), time=None, sequence=None))
    assert look(decoder, 341.6, "any") == ((), 341.6, MISSING)


# Times

SECONDS = START // SECOND


@pytest.mark.parametrize(
    ("at", "moment"),
    [
        (MISSING, "no-time"),
        (None, "no-time"),
        (SECONDS, START),
        (SECONDS + 0.25, START + 250_000),
        (str(SECONDS), START),
        (SECONDS * 1000, START),
        (SECONDS * 1000 + 0.5, START + 500),
        ("2026-03-02T06:41:12.3Z", START + 300_000),
        ("2026-03-02T08:41:12+02:00", START),
        (0, 0),
        (-1, -SECOND),
        (99_999_999_999, "future"),  # in seconds: the year 5138
        (100_000_000_000, 100_000_000 * SECOND),  # from here up in milliseconds: 1973
        (-100_000_000_000, -100_000_000 * SECOND),
        ("", "bad-time"),
        ("yesterday", "bad-time"),
        ("2026-03-02T06:41:12", "bad-time"),
        ("2026-03-02", "bad-time"),
        (True, "bad-time"),
        ([SECONDS], "bad-time"),
        ({}, "bad-time"),
        (math.nan, "bad-time"),
        (math.inf, "bad-time"),
        (-math.inf, "bad-time"),
        (-99_999_999_999, "bad-time"),  # before the year 1
        ("\ud800", "bad-time"),
        (1e300, "future"),
        (10**39, "future"),
        ("2999-01-01T00:00:00Z", "future"),
    ],
)
def test_a_time_is_an_instant_or_has_a_reason(at: object, moment: int | str) -> None:
    assert judge_time(at, START) == moment


def test_the_future_begins_over_five_minutes_past_the_arrival() -> None:
    assert FUTURE == 300 * SECOND
    assert judge_time(SECONDS + 300, START) == START + FUTURE
    assert judge_time(SECONDS + 300.000001, START) == "future"


scalars = st.none() | st.booleans() | st.integers() | st.floats() | st.text()


@given(scalars | st.binary() | st.lists(scalars) | st.datetimes().map(str))
def test_any_time_and_number_is_judged(value: object) -> None:
    moment = judge_time(value, START)
    assert moment in ("no-time", "bad-time", "future") or int(moment) <= START + FUTURE
    number = judge_sequence(value)
    assert number is None or 0 <= number < 2**63


@pytest.mark.parametrize(
    ("value", "number"),
    [
        (0, 0),
        (8112, 8112),
        (8112.0, 8112),
        ("8112", 8112),
        ("8.112e3", 8112),
        (2**63 - 1, 2**63 - 1),
        ("9223372036854775807", 2**63 - 1),
        (2**63, None),
        (-1, None),
        ("-1", None),
        (8.5, None),
        (True, None),
        (None, None),
        (MISSING, None),
        ("x", None),
        ("", None),
        ("1e999", None),
        (math.nan, None),
        (math.inf, None),
        ([1], None),
    ],
)
def test_a_sequence_number_is_a_count_or_none(value: object, number: int | None) -> None:
    assert judge_sequence(value) == number
