"""``driftbell check``: is the configuration right, and what will it do on the line?

Knows where problems and answers are printed. Must not know what a configuration may hold.
"""

from __future__ import annotations

import argparse
import json
import os
import sys
from dataclasses import asdict
from pathlib import Path
from typing import Any

from monitor.commandline import DONE, WRONG, CommandError
from monitor.problems import ConfigurationError
from monitor.resolve import read_settings
from monitor.summary import summary
from monitor.summary_words import lines


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="a YAML file, or a folder of them")
    parser.add_argument("--json", action="store_true", help="print one JSON object")


def main(args: argparse.Namespace) -> int:
    """Print what the configuration will do; every problem to stderr and 2 where it is wrong."""
    try:
        settings = read_settings(Path(args.config), os.environ)
    except ConfigurationError as error:
        for problem in error.problems:
            print(problem, file=sys.stderr)
        if args.json:
            _print_json({"valid": False, "problems": [asdict(each) for each in error.problems]})
        raise CommandError(error.count, WRONG) from None
    if args.json:
        _print_json({"valid": True, **summary(settings)})
    else:
        print("\n".join([f"{args.config} is valid.", *lines(summary(settings))]))
    return DONE


def _print_json(value: dict[str, Any]) -> None:
    print(json.dumps(value, ensure_ascii=False, indent=2))
