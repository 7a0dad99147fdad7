"""A command beside a running daemon gives the processor back, again and again."""

from __future__ import annotations

import json
import subprocess
import sys
from typing import Any

import pytest

SCRIPT = """
import json, os, resource, time
from monitor.background import Background
rest = Background(rests={rests})
until = time.perf_counter() + 0.05
count = 0
def through():
    global count
    while time.perf_counter() < until:
        count += 1
        yield count
assert list(rest.through(through())) == list(range(1, count + 1))
gave_back = resource.getrusage(resource.RUSAGE_SELF).ru_nvcsw
print(json.dumps({{"gave_back": gave_back, "nice": os.nice(0), "processor": time.process_time()}}))
"""


@pytest.mark.parametrize("rests", [True, False])
def test_it_gives_the_processor_back(rests: bool) -> None:
    # A process of its own: a priority that was lowered stays low.
    command = [sys.executable, "-c", SCRIPT.format(rests=rests)]
    done = subprocess.run(command, capture_output=True, check=True)
    told: dict[str, Any] = json.loads(done.stdout)
    assert told["nice"] == 19
    # 50 ms of 50 µs work and 100 µs rest make 300 rests; a busy machine sees fewer.
    assert (told["gave_back"] > 30) == rests
