"""JSON texts and numbers: what is read, what is refused, and under which reason."""

import json
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.numbers import NOT_JSON, number, parse, text

plain = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-(2**63), 2**63)
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(st.characters(codec="utf-8")),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=5), inner),
    max_leaves=12,
)


@given(plain)
def test_every_json_text_is_read_as_it_was_written(document: object) -> None:
    assert parse(json.dumps(document).encode()) == document


@given(st.binary(max_size=60) | st.text(max_size=60).map(str.encode))
def test_any_bytes_are_read_or_refused(payload: bytes) -> None:
    document = parse(payload)
    value = number(document)
    assert document is not NOT_JSON or value == "not-a-number"
    assert value in ("not-a-number", "not-finite") or math.isfinite(float(value))


@pytest.mark.parametrize(
    ("payload", "value"),
    [
        (b"341.6", 341.6),
        (b" 341.6\n", 341.6),
        (b"-0", 0.0),
        (b"3e2", 300.0),
        (b"18446744073709551616", 18446744073709551616.0),
        (b'"341.6"', 341.6),
        (b'"-3e-2"', -0.03),
        (b"NaN", "not-finite"),
        (b"Infinity", "not-finite"),
        (b"-Infinity", "not-finite"),
        (b"1e999", "not-finite"),
        (b"-1e999", "not-finite"),
        (b"9" * 400, "not-finite"),
        (b"9" * 5_000, "not-finite"),
        (b'"1e999"', "not-finite"),
        (b'"NaN"', "not-a-number"),
        (b'"Infinity"', "not-a-number"),
        (b'"0x10"', "not-a-number"),
        (b'"1_000"', "not-a-number"),
        (b'"+1"', "not-a-number"),
        (b'" 1"', "not-a-number"),
        (b'"1."', "not-a-number"),
        (b'".5"', "not-a-number"),
        (b'"01"', "not-a-number"),
        ('"\u0663"'.encode(), "not-a-number"),  # a digit, but not one of JSON's
        (b'""', "not-a-number"),
        (b"true", "not-a-number"),
        (b"false", "not-a-number"),
        (b"[1]", "not-a-number"),
        (b'{"v": 1}', "not-a-number"),
        (b"nan", "not-a-number"),
        (b"3,4", "not-a-number"),
        (b"0x10", "not-a-number"),
        (b"1_000", "not-a-number"),
        (b"\xff", "not-a-number"),
        (b"", "not-a-number"),
    ],
)
def test_a_number_is_a_json_number_or_a_text_that_holds_one(
    payload: bytes, value: float | str
) -> None:
    assert number(parse(payload)) == value


@given(st.text(st.sampled_from("0123456789+-.eE "), min_size=1, max_size=8))
def test_a_text_is_a_number_where_json_says_so(text: str) -> None:
    try:
        expected: float | str = float(json.loads(text)) if text.strip() == text else "not-a-number"
    except ValueError:
        expected = "not-a-number"
    assert number(text) == ("not-finite" if expected in (math.inf, -math.inf) else expected)


def test_what_orjson_refuses_in_a_field_nobody_asked_for_does_no_harm() -> None:
    assert parse(b'{"net": 341.6, "spare": NaN, "far": 1e999}')["net"] == 341.6  # type: ignore[index]
    assert parse(b'{"net": 341.6, "text": "\\ud800"}')["net"] == 341.6  # type: ignore[index]


@given(st.binary(max_size=40) | plain.map(lambda document: json.dumps(document).encode()))
def test_whatever_was_read_can_be_shown(payload: bytes) -> None:
    document = parse(payload)
    if document is not NOT_JSON:
        assert text(document)


@pytest.mark.parametrize(
    "payload", [b'"\\ud800"', b"[NaN, %s]" % (b"9" * 30), b"[" * 1_020 + b"]" * 1_020]
)
def test_what_orjson_does_not_write_is_shown_all_the_same(payload: bytes) -> None:
    document = parse(payload)
    assert document is not NOT_JSON
    assert text(document)


@pytest.mark.parametrize(
    "payload",
    [
        b"",
        b"{",
        b'{"net": 1',
        b'{"net": 1}}',
        b"{'net': 1}",
        b'{"net": 01}',
        b'{"net": nan}',
        b"\xef\xbb\xbf1",
        b'"\xff"',
        b"[" * 100_000,
        b"[" * 100_000 + b"]" * 100_000,
    ],
)
def test_what_is_no_json_is_refused(payload: bytes) -> None:
    assert parse(payload) is NOT_JSON
