"""``driftbell describe`` as another program runs it."""

from __future__ import annotations

import json
import os
import subprocess
import sys

import pytest

from monitor import describe


def run(*arguments: str, seed: str = "0") -> subprocess.CompletedProcess[str]:
    """The command in a process of its own."""
    return subprocess.run(
        [sys.executable, "-m", "monitor", "describe", *arguments],
        capture_output=True,
        text=True,
        check=False,
        env={**os.environ, "PYTHONHASHSEED": seed},
    )


@pytest.mark.parametrize(
    ("arguments", "expected"),
    [((), describe.json_schemas()), (("--asyncapi",), describe.asyncapi())],
    ids=["schemas", "asyncapi"],
)
def test_prints_one_json_object_and_nothing_else(
    arguments: tuple[str, ...], expected: object
) -> None:
    done = run(*arguments)
    assert (done.returncode, done.stderr) == (0, "")
    assert json.loads(done.stdout) == expected


@pytest.mark.parametrize("arguments", [(), ("--asyncapi",)], ids=["schemas", "asyncapi"])
def test_prints_the_same_bytes_every_time(arguments: tuple[str, ...]) -> None:
    assert run(*arguments, seed="1").stdout == run(*arguments, seed="2").stdout


def test_an_unknown_argument_is_a_wrong_command_line() -> None:
    assert run("line-2.yaml").returncode == 2
