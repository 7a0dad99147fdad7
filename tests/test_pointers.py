"""JSON Pointer, on the document of RFC 6901, section 5, and on what is no pointer."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.pointers import MISSING, lookup, parse

# RFC 6901, section 5.
DOCUMENT = {
    "foo": ["bar", "baz"],
    "": 0,
    "a/b": 1,
    "c%d": 2,
    "e^f": 3,
    "g|h": 4,
    "i\\j": 5,
    'k"l': 6,
    " ": 7,
    "m~n": 8,
}


@pytest.mark.parametrize(
    ("pointer", "value"),
    [
        ("", DOCUMENT),
        ("/foo", ["bar", "baz"]),
        ("/foo/0", "bar"),
        ("/", 0),
        ("/a~1b", 1),
        ("/c%d", 2),
        ("/e^f", 3),
        ("/g|h", 4),
        ("/i\\j", 5),
        ('/k"l', 6),
        ("/ ", 7),
        ("/m~0n", 8),
    ],
)
def test_the_examples_of_rfc_6901(pointer: str, value: object) -> None:
    assert lookup(DOCUMENT, parse(pointer)) == value


@pytest.mark.parametrize(
    "pointer",
    [
        "/bar",
        "/foo/2",
        "/foo/-",
        "/foo/01",
        "/foo/-1",
        "/foo/+1",
        "/foo/٠",
        "/foo/bar",
        "/foo/0/0",
        "/foo/9999999999999999999",
        "/m~0n/x",
        "/foo/ 0",
        "/foo/0/",
    ],
)
def test_a_place_that_is_not_there_is_missing(pointer: str) -> None:
    assert lookup(DOCUMENT, parse(pointer)) is MISSING


@pytest.mark.parametrize("document", [None, True, 3, 3.5, "text", b"bytes"])
def test_a_scalar_has_no_places_but_itself(document: object) -> None:
    assert lookup(document, ()) is document
    assert lookup(document, ("0",)) is MISSING


def test_tilde_one_is_no_slash_after_unescaping() -> None:
    assert parse("/~01") == ("~1",)


@pytest.mark.parametrize("text", ["net", "/a~", "/a~2", "/~/", "#/net"])
def test_what_is_no_pointer_is_refused_with_what_to_write(text: str) -> None:
    with pytest.raises(ValueError, match="is not a JSON Pointer: "):
        parse(text)


@given(st.lists(st.text()))
def test_any_tokens_survive_being_written(tokens: list[str]) -> None:
    written = "".join("/" + t.replace("~", "~0").replace("/", "~1") for t in tokens)
    assert parse(written) == tuple(tokens)
