"""Fixtures shared by all tests: real brokers, and the real daemon on them.

Knows which brokers this machine has. Tests take ``broker`` and run once on each of them.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from pathlib import Path

# Before numpy is loaded: where tests run side by side, threads of its matrix products wait for each
# other a hundred times as long as they compute.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import hypothesis
import pytest
from brokers import Broker, Client, Daemon, Embedded, Mosquitto, mosquitto_path
from browsers import chromium_path

# How long an example takes says more of the machine than of the code.
hypothesis.settings.register_profile("untimed", deadline=None)
hypothesis.settings.load_profile("untimed")

BROKERS = ["embedded", "mosquitto"] if mosquitto_path() else ["embedded"]


def pytest_configure() -> None:
    if os.environ.get("CI") and not mosquitto_path():
        raise pytest.UsageError("CI is set but mosquitto is missing: apt-get install mosquitto")
    if os.environ.get("CI") and not chromium_path():
        raise pytest.UsageError("CI is set but chromium is missing: apt-get install chromium")


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    # At the end rather than in the header, which quiet runs leave out.
    missing = "" if mosquitto_path() else "; mosquitto is not on PATH, its tests were left out"
    missing += "" if chromium_path() else "; chromium is not on PATH, no page was opened"
    terminalreporter.write_line(f"brokers used: {', '.join(BROKERS)}{missing}")


@pytest.fixture
def mosquitto(tmp_path: Path) -> Iterator[Callable[..., Mosquitto]]:
    """Makes and starts a mosquitto with the given options; all are stopped at the end."""
    if mosquitto_path() is None:
        pytest.skip("mosquitto is not on PATH")
    made: list[Mosquitto] = []

    def make(**options: object) -> Mosquitto:
        folder = tmp_path / f"mosquitto-{len(made)}"
        folder.mkdir()
        made.append(Mosquitto(folder, **options))
        made[-1].start()
        return made[-1]

    yield make
    for each in made:
        each.stop()


@pytest.fixture(params=BROKERS)
def broker(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[Broker]:
    """A fresh, running broker: the test runs once on each kind this machine has."""
    kinds: dict[str, Callable[[Path], Broker]] = {"embedded": Embedded, "mosquitto": Mosquitto}
    running = kinds[request.param](tmp_path)
    running.start()
    yield running
    running.stop()


@pytest.fixture
def client(broker: Broker) -> Iterator[Client]:
    """A connected client of ``broker``."""
    with Client(broker.port) as connected:
        yield connected


@pytest.fixture
def daemon(broker: Broker, tmp_path: Path) -> Iterator[Callable[..., Daemon]]:
    """Makes and starts ``driftbell run`` on ``broker`` with a configuration (its ``broker`` key is
    filled in); returns once it is subscribed. All are stopped at the end."""
    made: list[Daemon] = []

    def make(configuration: dict[str, object]) -> Daemon:
        folder = tmp_path / f"daemon-{len(made)}"
        folder.mkdir()
        made.append(Daemon(folder, broker.port, configuration))
        made[-1].start()
        return made[-1]

    yield make
    for each in made:
        if each.process is not None:
            each.stop()
