"""A daemon that things happen to: its process, what is fed to it meanwhile, and what must be true.

Knows processes, clocks and disks from outside, and the oracles that all faults share. Must not know
any one fault.
"""

from __future__ import annotations

import contextlib
import os
import random
import subprocess
import sys
import threading
import time
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from operator import itemgetter
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import orjson
from brokers import TIMEOUT, Broker, Client, Embedded, Received
from daemons import ALERTS, CONFIGURATION, HEALTH, ROOT, Launched, events, recording, until

from monitor.journal import open_reader

CUTS = Path(__file__).with_name("cuts.py")
TORQUE = "line-2/capper/torque"
_PATIENCE = 300.0  # seconds a command may take over a long recording

Published = list[tuple[str, bytes]]


class Faulty(Launched):
    """``driftbell run``, perhaps with another environment, or dying at a place in its code."""

    def __init__(
        self, folder: Path, port: int, configuration: dict[str, object] = CONFIGURATION
    ) -> None:
        super().__init__(folder, port, configuration)
        self.log.touch()
        self._log_before = 0
        self.environment: dict[str, str] = {}
        self.cut: tuple[str, int] | None = None
        """(place, how often it is passed before the process kills itself there); see cuts.py."""

    def launch(self, *, stderr: int | None = None) -> subprocess.Popen[bytes]:
        """Start it, and return at once."""
        self._log_before = self.log.stat().st_size
        words = ["-m", "monitor"] if self.cut is None else [str(CUTS), *map(str, self.cut)]
        with self.log.open("ab") as log:
            self.process = subprocess.Popen(
                [sys.executable, *words, "run", str(self.configuration)],
                stdin=subprocess.DEVNULL,
                stdout=log,
                stderr=log if stderr is None else stderr,
                env={**os.environ, **self.environment},
            )
        return self.process

    def online(self) -> Self:
        """Launch it, and return once it is subscribed."""
        self.launch()
        self.await_online()
        return self

    def await_online(self) -> None:
        """Wait until the process that was launched last is subscribed."""

        def subscribed() -> bool:
            return b'"connected"' in self.log.read_bytes()[self._log_before :]

        until(subscribed, "it is subscribed", self.is_running)

    def signal(self, number: int) -> None:
        """Send its process a signal."""
        assert self.process is not None
        self.process.send_signal(number)

    def await_count(self, count: int) -> None:
        """Wait until the journal holds so many messages; fails once it stays as it is."""
        last, since = -1, time.monotonic()
        while (found := self.count()) < count:
            if found != last:
                last, since = found, time.monotonic()
            assert self.is_running(), f"it ended\n{self.log.read_text()[-3_000:]}"
            stood = time.monotonic() - since
            assert stood < TIMEOUT, f"{found} of {count} messages, and no more\n{self.tail()}"
            threading.Event().wait(0.02)

    def tail(self) -> str:
        """The end of its log."""
        return self.log.read_text()[-3_000:]


@contextlib.contextmanager
def faulty(
    folder: Path, port: int, configuration: dict[str, object] = CONFIGURATION
) -> Iterator[Faulty]:
    """A daemon that is not launched yet; ended after the block."""
    daemon = Faulty(folder, port, configuration)
    try:
        yield daemon
    finally:
        daemon.end()


def single(characteristic: str, **sections: object) -> dict[str, object]:
    """The configuration with one of its characteristics."""
    kept: Any = CONFIGURATION["characteristics"]
    return {
        **CONFIGURATION,
        "characteristics": {characteristic: kept[characteristic]},
        **sections,
    }


SHORT_ALERTS: dict[str, object] = {"off_delay": "200ms", "rejoin": "100ms"}
"""For readings that have their arrival for a time: alerts come and go while a test lasts."""


def torques(count: int, seed: int = 1, *, broker: Broker) -> Published:
    """``count`` values with neither time nor number, as a gauge of 0.01 N·m gives them.

    Many are equal to their neighbours, so only their order tells them apart. A broker that sends
    again without DUP and under new identifiers gets a finer gauge: nobody can tell whether one that
    equals the last is it again.
    """
    chance = random.Random(seed)
    digits = 6 if isinstance(broker, Embedded) else 2
    return [(TORQUE, b"%.*f" % (digits, chance.gauss(2.0, 0.11))) for _ in range(count)]


class Feed:
    """Publishes messages at a rate while the block lasts, from a thread of its own.

    ``sent`` is what the broker has taken; leaving the block waits for the message under way.
    """

    def __init__(self, port: int, messages: Published, rate: float) -> None:
        self.sent: Published = []
        self._messages = messages
        self._rate = rate
        self._client = Client(port)
        self._enough = threading.Event()
        self._failure: BaseException | None = None
        self._thread = threading.Thread(target=self._run)

    @property
    def is_over(self) -> bool:
        """Whether nothing more will come."""
        return not self._thread.is_alive()

    def __enter__(self) -> Self:
        self._client.connect()
        self._thread.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        self._enough.set()
        self._thread.join()
        self._client.disconnect()
        if self._failure is not None and error is None:
            raise self._failure

    def await_sent(self, count: int) -> None:
        """Wait until so many are with the broker."""
        while len(self.sent) < count and not self.is_over:
            self._thread.join(0.02)
        assert len(self.sent) >= count, self._failure

    def _run(self) -> None:
        begun = time.monotonic()
        few = max(1, round(self._rate / 20))
        try:
            for at in range(0, len(self._messages), few):
                chunk = self._messages[at : at + few]
                self._client.publish_all(chunk)
                self.sent += chunk
                if self._enough.wait(max(0.0, begun + at / self._rate - time.monotonic())):
                    break
        except BaseException as error:  # the test's thread is to hear of it
            self._failure = error


class Watcher:
    """Sees all that the daemon publishes, from before it starts until it has taken its leave."""

    def __init__(self, port: int) -> None:
        self._client = Client(port)

    def __enter__(self) -> Self:
        self._client.connect()
        self._client.subscribe(f"{ROOT}/#")
        return self

    def __exit__(self, *_: object) -> None:
        self._client.disconnect()

    def await_health(
        self, daemon: Faulty, condition: Callable[[dict[str, Any]], bool]
    ) -> dict[str, Any]:
        """Wait for a health message, said since we watch, that meets the condition."""
        return self._await(daemon, condition, HEALTH)

    def await_alert(
        self, daemon: Faulty, condition: Callable[[dict[str, Any]], bool]
    ) -> dict[str, Any]:
        """Wait for an alert event that meets the condition."""
        return self._await(daemon, condition, ALERTS)

    def _await(
        self, daemon: Faulty, condition: Callable[[dict[str, Any]], bool], topic: str
    ) -> dict[str, Any]:
        found: list[dict[str, Any]] = []

        def came(messages: Sequence[Received]) -> bool:
            found[:] = [m.body for m in messages if not m.retained and condition(m.body)]
            return bool(found)

        try:
            self._client.wait_for(came, topic, daemon.is_running)
        except AssertionError as error:
            raise AssertionError(f"{error}\n{daemon.tail()}") from None
        return found[0]

    def last_health(self) -> dict[str, Any]:
        """The latest that was said of the daemon's health."""
        return self._client.received(HEALTH)[-1].body

    def alerts_until_farewell(self) -> list[bytes]:
        """Every alert event, each (id, sequence) once, in order, without ``published``.

        Fails where one (id, sequence) had two contents.
        """
        self._client.wait_for(
            lambda ms: bool(ms) and ms[-1].body["last_error"] == "stopped", HEALTH
        )
        return [orjson.dumps(event) for event in events(self._client.received(ALERTS))]


def command(*words: object, module: str = "monitor") -> bytes:
    """What a command prints; it must succeed."""
    done = subprocess.run(
        [sys.executable, "-m", module, *map(str, words)],
        capture_output=True,
        timeout=_PATIENCE,
        check=False,
    )
    assert done.returncode == 0, done.stderr.decode()
    return done.stdout


def undisturbed(configuration: Path, recorded: Path) -> list[bytes]:
    """The alert lines that a replay of the recording gives."""
    return command("play", configuration, recorded, "--alerts", "-", module="replay").splitlines()


def exported(daemon: Launched) -> Path:
    """The daemon's journal as a recording."""
    to = daemon.journal.with_suffix(".jsonl")
    command("export", daemon.journal, "--to", to)
    return to


def check_once(found: Published, published: Published) -> None:
    """The journal holds what was published: each message once, in the order of its topic."""
    found, published = (sorted(some, key=itemgetter(0)) for some in (found, published))
    if found == published:
        return
    lost, twice = Counter(published) - Counter(found), Counter(found) - Counter(published)
    places = zip(found, published, strict=False)
    at = next((n for n, (a, b) in enumerate(places) if a != b), min(len(found), len(published)))
    raise AssertionError(
        f"{len(published)} published, {len(found)} journaled; {lost.total()} lost, "
        f"{twice.total()} too many; first difference at {at}: "
        f"{found[at : at + 3]} where {published[at : at + 3]} was published"
    )


def check_complete(daemon: Faulty, watcher: Watcher, published: Published) -> list[bytes]:
    """Nothing lost, nothing twice: stops the daemon, which runs undisturbed now, and compares.

    The journal holds each message once, in order; consumers saw the alerts of an undisturbed replay
    of it, in order, and no (id, sequence) with two contents. Returns the alerts.
    """
    daemon.await_online()
    daemon.await_count(len(published))
    until(lambda: not daemon.waiting(), "an empty outbox", daemon.is_running)
    assert daemon.stop() == 0, daemon.tail()
    check_once(daemon.journaled(), published)
    alerts = watcher.alerts_until_farewell()
    assert alerts == undisturbed(daemon.configuration, exported(daemon))
    return alerts


def check_same_as_published(daemon: Faulty, alerts: list[bytes], published: Published) -> None:
    """What was published gives these alerts, however it arrived: for readings with identity."""
    recorded = recording(daemon.journal.with_name("published.jsonl"), published)
    assert alerts == undisturbed(daemon.configuration, recorded)


def journaled_alerts(daemon: Launched) -> list[bytes]:
    """The alert events in the journal, in order: for when a broker may have lost some."""
    with contextlib.closing(open_reader(daemon.journal)) as db:
        return [event for (event,) in db.execute("SELECT event FROM alerts ORDER BY position")]
