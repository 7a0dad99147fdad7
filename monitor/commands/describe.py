"""``driftbell describe``: the messages' form, for the programs that read them.

Knows the command line. Must not know what a message holds.
"""

from __future__ import annotations

import argparse
import json

from monitor import describe
from monitor.commandline import DONE


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument(
        "--asyncapi",
        action="store_true",
        help="an AsyncAPI 3.0 document instead: topics, messages and how they are delivered",
    )


def main(args: argparse.Namespace) -> int:
    """Print one JSON object."""
    document = describe.asyncapi() if args.asyncapi else describe.json_schemas()
    print(json.dumps(document, ensure_ascii=False, indent=2))
    return DONE
