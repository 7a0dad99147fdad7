"""What commands share on their command lines."""

from __future__ import annotations

import argparse

import pytest

from monitor.commandline import broker_address, run


@pytest.mark.parametrize(
    ("text", "address"),
    [
        ("localhost:1884", ("localhost", 1884)),
        ("plant.example", ("plant.example", 1883)),
        ("10.0.0.7:1", ("10.0.0.7", 1)),
        ("[::1]:8883", ("::1", 8883)),
        ("[::1]", ("::1", 1883)),
    ],
)
def test_a_broker_is_host_and_port(text: str, address: tuple[str, int]) -> None:
    assert broker_address(text) == address


@pytest.mark.parametrize("text", ["", ":1883", "host:", "host:x", "host:0", "host:65536", "h:²"])
def test_anything_else_is_refused_with_what_to_write(text: str) -> None:
    with pytest.raises(argparse.ArgumentTypeError, match="write localhost:1883"):
        broker_address(text)


def test_a_value_may_be_negative(capsys: pytest.CaptureFixture[str]) -> None:
    commands = {"design": ("replay.commands.design", "")}
    words = ["design", "--cusum", "0.5,5", "--direction", "up", "--shifts", "-1,0", "--json"]
    assert run("driftbell-replay", "", commands, words) == 0
    assert '"shift":-1.0' in capsys.readouterr().out.replace(" ", "")
