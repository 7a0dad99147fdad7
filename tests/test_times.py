"""Durations and instants: read and written as people and gauges do, exact to the microsecond."""

from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.times import (
    DAY,
    EPOCH,
    SECOND,
    format_duration,
    format_time,
    parse_duration,
    parse_iso_time,
)

LAST = 253_402_300_799 * SECOND + 999_999  # 9999-12-31T23:59:59.999999Z
FIRST = -62_135_596_800 * SECOND  # 0001-01-01T00:00:00Z


@pytest.mark.parametrize(
    ("text", "microseconds"),
    [
        ("500ms", 500_000),
        ("30s", 30 * SECOND),
        ("0.5s", 500_000),
        ("5min", 300 * SECOND),
        ("8h", 28_800 * SECOND),
        ("14d", 14 * DAY),
        ("7us", 7),
        (" 30 s ", 30 * SECOND),
        ("0s", 0),
        ("PT30S", 30 * SECOND),
        ("PT0.5S", 500_000),
        ("PT5M", 300 * SECOND),
        ("P1DT2H", DAY + 7_200 * SECOND),
        ("P2W", 14 * DAY),
        ("PT0S", 0),
    ],
)
def test_a_duration_is_read(text: str, microseconds: int) -> None:
    assert parse_duration(text) == microseconds


@pytest.mark.parametrize(
    "text",
    [
        "",
        "30",
        "s",
        "-30s",
        "5m",
        "5 minutes",
        "1e3s",
        "30S",
        "5min30s",
        "٣s",
        "P",
        "PT",
        "P1DT",
        "P1M",
        "P1Y",
        "P1Y2D",
        "p1d",
        "PT5",
        "P5S",
    ],
)
def test_what_is_no_duration_is_refused_with_what_to_write(text: str) -> None:
    with pytest.raises(ValueError, match="is not a duration: write 500ms, 30s, 5min, 8h or 14d"):
        parse_duration(text)


@given(st.integers(0, 10_000 * DAY))
def test_a_duration_survives_being_written(microseconds: int) -> None:
    assert parse_duration(format_duration(microseconds)) == microseconds


@pytest.mark.parametrize(
    ("microseconds", "text"),
    [(0, "0s"), (1, "1us"), (1_500_000, "1500ms"), (90 * SECOND, "90s"), (14 * DAY, "14d")],
)
def test_a_duration_is_written_in_the_largest_unit_that_is_exact(
    microseconds: int, text: str
) -> None:
    assert format_duration(microseconds) == text


@pytest.mark.parametrize(
    ("microseconds", "text"),
    [
        (0, "1970-01-01T00:00:00.000Z"),
        (1_772_433_672_300_000, "2026-03-02T06:41:12.300Z"),
        (1_772_433_672_300_001, "2026-03-02T06:41:12.300001Z"),
        (-1, "1969-12-31T23:59:59.999999Z"),
        (LAST, "9999-12-31T23:59:59.999999Z"),
        (FIRST, "0001-01-01T00:00:00.000Z"),
    ],
)
def test_an_instant_has_three_decimals_or_six_if_needed(microseconds: int, text: str) -> None:
    assert format_time(microseconds) == text


@given(st.integers(FIRST, LAST))
def test_an_instant_survives_being_written(microseconds: int) -> None:
    assert parse_iso_time(format_time(microseconds)) == microseconds


@given(st.integers(FIRST + DAY, LAST - DAY), st.integers(-1439, 1439))
def test_an_instant_is_the_same_in_any_zone(microseconds: int, minutes: int) -> None:
    sign, size = "-" if minutes < 0 else "+", abs(minutes)
    local = (EPOCH + timedelta(microseconds=microseconds, minutes=minutes)).replace(tzinfo=None)
    text = f"{local.isoformat()}{sign}{size // 60:02}:{size % 60:02}"
    assert parse_iso_time(text) == microseconds


@pytest.mark.parametrize(
    "text",
    [
        "2026-03-02T06:41:12Z",
        "20260302T064112Z",
        "2026-03-02 06:41:12+00:00",
        "2026-03-02T06:41:12.000Z",
        "2026-03-02T08:41:12+02:00",
        "2026-W10-1T06:41:12Z",
    ],
)
def test_the_usual_spellings_of_an_instant_are_read(text: str) -> None:
    moment = datetime(2026, 3, 2, 6, 41, 12, tzinfo=UTC)
    assert parse_iso_time(text) == round(moment.timestamp()) * SECOND


@pytest.mark.parametrize(
    "text",
    [
        "",
        "now",
        "2026-03-02",
        "2026-03-02T06:41:12",
        "2026-02-30T06:41:12Z",
        "06:41:12Z",
        "2026-03-02T06:41:60Z",
        "2026-03-02T25:41:12Z",
        "2026-03-02T06:41:12+25:00",
        "\ud800Z",
    ],
)
def test_an_instant_without_an_offset_or_no_instant_is_refused(text: str) -> None:
    with pytest.raises(ValueError):
        parse_iso_time(text)
