"""Reaching a broker, and when to try again."""

from __future__ import annotations

import math
import socket
from threading import Event

import pytest

from monitor import dialling
from monitor.dialling import Dialler
from monitor.plan import BrokerPlan

PATIENCE = 20.0


def plan(host: str = "127.0.0.1", port: int = 1) -> BrokerPlan:
    return BrokerPlan(host, port, "dialler", 60)


def dial(dialler: Dialler, woken: Event) -> socket.socket:
    """Ask until there is an answer."""
    assert dialler.delay() == 0.0
    assert dialler.ask() is None
    assert woken.wait(PATIENCE)
    woken.clear()
    assert dialler.delay() == 0.0
    connection = dialler.ask()
    assert connection is not None
    return connection


def test_connects() -> None:
    woken = Event()
    with socket.create_server(("127.0.0.1", 0)) as server:
        dialler = Dialler(plan(*server.getsockname()), woken.set)
        with dial(dialler, woken) as connection:
            accepted, _ = server.accept()
            with accepted:
                accepted.sendall(b"x")
                assert connection.recv(1) == b"x"


@pytest.mark.parametrize("host", ["127.0.0.1", "a..b", "x" * 300])
def test_says_what_is_wrong_and_tries_again(host: str) -> None:
    woken = Event()
    with socket.socket() as unused:
        unused.bind(("127.0.0.1", 0))  # bound, but not listening
        dialler = Dialler(plan(host, unused.getsockname()[1]), woken.set)
        for _ in range(2):
            with pytest.raises(OSError, match=r"."):
                dial(dialler, woken)
            dialler.lost()
            dialler._try_at = -math.inf  # the time has come


def test_does_not_wait_for_a_connection_that_never_comes() -> None:
    with socket.socket() as listener, socket.socket() as first, socket.socket() as second:
        listener.bind(("127.0.0.1", 0))
        listener.listen(0)
        first.connect(listener.getsockname())
        second.setblocking(False)
        second.connect_ex(listener.getsockname())  # now its queue is full
        dialler = Dialler(plan(*listener.getsockname()), lambda: None)
        assert dialler.ask() is None
        assert dialler.ask() is None
        assert dialler.delay() == math.inf


def test_tries_at_once_and_then_ever_more_seldom() -> None:
    dialler = Dialler(plan(), lambda: None)
    delays = [dialler.lost() for _ in range(20)]
    assert delays[0] <= 0.1
    assert delays == sorted(delays)
    assert delays[-1] == delays[-2] == 30.0
    assert 0 < dialler.delay() <= 30.0
    assert dialler.ask() is None


def test_only_a_connection_that_held_makes_it_eager_again(monkeypatch: pytest.MonkeyPatch) -> None:
    dialler = Dialler(plan(), lambda: None)
    dialler.lost()
    dialler.holds()
    assert dialler.lost() > 0.1, "ended at once: two clients under one name, perhaps"
    monkeypatch.setattr(dialling, "_STEADY", 0.0)
    dialler.holds()
    assert dialler.lost() <= 0.1
    assert dialler.lost() > 0.1, "a try that fails is no connection that held"


def test_connections_that_end_at_once_one_after_the_other_look_like_two_of_a_name(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    dialler = Dialler(plan(), lambda: None)
    for _ in range(10):
        dialler.lost()
    assert not dialler.is_contended, "nobody is there: that is something else"
    for count in range(1, 4):
        dialler.holds()
        dialler.lost()
        assert dialler.is_contended is (count == 3)
    assert dialler.lost() == 30.0, "and makes way"
    assert dialler.is_contended
    monkeypatch.setattr(dialling, "_STEADY", 0.0)
    dialler.holds()
    dialler.lost()
    assert not dialler.is_contended
