"""``driftbell check``: is the configuration right, and what will it do on the line?

Knows where problems and answers are printed. Must not know what a configuration may hold.
"""

from __future__ import annotations

import argparse
import json
import os
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import asdict
from pathlib import Path
from typing import Any

from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError
from monitor.configuration.config import load
from monitor.configuration.problems import ConfigurationError
from monitor.configuration.resolve import resolve
from monitor.configuration.summary import kept, summary
from monitor.configuration.summary_words import lines

PATIENCE = 1.0
"""Seconds after which somebody at a terminal is told what takes so long."""


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="a YAML file, or a folder of them")
    parser.add_argument("--json", action="store_true", help="print one JSON object")


def main(args: argparse.Namespace) -> int:
    """Print what the configuration will do; every problem to stderr and 2 where it is wrong, 1
    where it would ring more often than the promises or the budget allow."""
    try:
        config = load(Path(args.config), os.environ)
    except ConfigurationError as error:
        for problem in error.problems:
            print(problem, file=sys.stderr)
        if args.json:
            _print_json({"valid": False, "problems": [asdict(each) for each in error.problems]})
        raise CommandError(error.count, WRONG) from None
    with _patience():
        found = summary(config, resolve(config))
    if args.json:
        _print_json({"valid": True, **found})
    else:
        warnings = len(found["warnings"])
        but = f", with {warnings} warning{'s'[: warnings > 1]} at the end" if warnings else ""
        print("\n".join([f"{args.config} is valid{but}.", *lines(found)]))
    if not kept(found):
        raise CommandError("it would ring more often than was agreed (see above)", COULD_NOT)
    return DONE


@contextmanager
def _patience() -> Iterator[None]:
    """Says what takes long, to whoever watches a terminal: some rules must be simulated."""
    text = "working out how often each rule rings with nothing wrong…"
    timer = threading.Timer(PATIENCE, print, [text], {"end": "", "file": sys.stderr, "flush": True})
    if sys.stderr.isatty():
        timer.start()
    yield
    if sys.stderr.isatty():
        timer.cancel()
        timer.join()
        print("\r\x1b[K", end="", file=sys.stderr)


def _print_json(value: dict[str, Any]) -> None:
    print(json.dumps(value, ensure_ascii=False, indent=2))
