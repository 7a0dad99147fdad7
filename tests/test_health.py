"""What the daemon says of itself, and when."""

from __future__ import annotations

from monitor.engine import Counts
from monitor.health import EVERY, NEXT_BY, Health, SetAsideNotices, will
from monitor.outputs import SetAside
from monitor.times import SECOND, format_time

NOW = 1_772_433_672 * SECOND


def test_is_due_when_connected_and_then_every_so_often() -> None:
    health = Health()
    health.connected(NOW)
    assert health.is_due(NOW)
    said = health.message(NOW, Counts(messages=3, set_aside={"late": 1}), 1_500_000, 2, 1)
    assert not health.is_due(NOW + EVERY - 1)
    assert health.is_due(NOW + EVERY)
    assert said["online"] is True
    assert said["since"] == said["time"] == format_time(NOW)
    assert said["next_by"] == format_time(NOW + NEXT_BY)
    assert NEXT_BY > EVERY
    assert said["counts"] is not None
    assert (said["counts"]["messages"], said["counts"]["set_aside"]) == (3, {"late": 1})
    assert (said["lag"], said["waiting"], said["last_error"]) == (1.5, 2, None)
    assert said["sessions_lost"] == 1
    health.connected(NOW + 1)
    assert health.is_due(NOW + 1), "who has just subscribed says so at once"


def test_promises_nothing_while_it_is_away() -> None:
    health = Health()
    health.disconnected(NOW, "gone")
    said = health.message(NOW, Counts(), None, 0, 0)
    assert (said["online"], said["next_by"], said["last_error"]) == (False, None, "gone")
    health.connected(NOW + 1)
    assert health.message(NOW + 1, Counts(), None, 0, 0)["last_error"] == "gone", "it did happen"


def test_what_stands_still_now_comes_before_what_was() -> None:
    health = Health()
    health.disconnected(NOW, "gone")
    health.connected(NOW + 1)
    health.frozen, health.unsafe = "the disk is full", 3
    said = health.message(NOW + 1, Counts(), None, 0, 0)
    assert (said["last_error"], said["qos_0"]) == ("the disk is full", 3)
    health.frozen = None
    assert health.message(NOW + 2, Counts(), None, 0, 0)["last_error"] == "gone"


def test_the_will_has_the_fields_of_any_other_word() -> None:
    said = Health().message(NOW, Counts(), None, 0, 0)
    assert will(NOW).keys() == said.keys()
    assert will(NOW)["online"] is False


def set_aside(reason: str, payload: bytes = b"x") -> SetAside:
    return SetAside(reason, "weight", NOW, "a/b", payload)


def test_notices_come_at_once_and_then_seldom() -> None:
    notices = SetAsideNotices()
    assert notices.add(set_aside("late"), NOW)
    assert notices.add(set_aside("future"), NOW), "each reason for itself"
    assert not notices.add(set_aside("late"), NOW + 1)
    assert not notices.add(set_aside("late", b"newest"), NOW + 2)
    assert notices.due(NOW + EVERY - 1) == []
    assert notices.due(NOW + EVERY) == ["late"]
    message = notices.message("late", Counts(set_aside={"late": 3}))
    assert (message["reason"], message["count"]) == ("late", 3)
    assert message["example"] == {
        "characteristic": "weight",
        "topic": "a/b",
        "payload": "newest",
        "time": format_time(NOW),
    }


def test_an_example_is_short_and_text_whatever_came() -> None:
    notices = SetAsideNotices()
    counts = Counts(set_aside={"late": 1})
    for payload in (b"\xff" * 10_000, "é".encode() * 10_000, b"\x00", "🫙".encode() * 300):
        notices.add(set_aside("late", payload), NOW)
        shown = notices.message("late", counts)["example"]["payload"]
        assert 1 <= len(shown) <= 200
        assert payload.decode(errors="replace").startswith(shown)
