"""What every command shares: finding its module, exit codes, errors for people.

Knows argparse and the three exit codes. Must not know what any command does: a command is a module
with ``configure(parser)`` and ``main(args) -> int``, imported only when it is asked for.
"""

from __future__ import annotations

import argparse
import importlib
import os
import re
import sys
from collections.abc import Mapping, Sequence

DONE, COULD_NOT, WRONG = 0, 1, 2

_NEGATIVE = re.compile(r"-[0-9.]")


class CommandError(Exception):
    """Something a person must mend; printed to stderr as it stands. ``code`` is the exit status."""

    def __init__(self, text: str, code: int = COULD_NOT) -> None:
        super().__init__(text)
        self.code = code


def broker_address(text: str) -> tuple[str, int]:
    """(host, port) of ``HOST:PORT``, for argparse's ``type``; the port is 1883 where not given."""
    host, colon, port = text.rpartition(":")
    if not colon or text.endswith("]"):  # [::1] is an address without a port
        host, port = text, "1883"
    host = host.removeprefix("[").removesuffix("]")
    if not host or not (port.isascii() and port.isdigit() and 0 < int(port) < 65_536):
        raise argparse.ArgumentTypeError(f"{text!r} is not HOST:PORT: write localhost:1883")
    return host, int(port)


def run(
    program: str,
    description: str,
    commands: Mapping[str, tuple[str, str]],
    arguments: Sequence[str] | None,
) -> int:
    """Run one of ``commands`` (name -> module path, one-line summary) and give its exit status."""
    words = list(sys.argv[1:] if arguments is None else arguments)
    parser = argparse.ArgumentParser(prog=program, description=description, allow_abbrev=False)
    subparsers = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)
    asked = words[0] if words else None
    for name, (path, summary) in commands.items():
        sub = subparsers.add_parser(name, help=summary, description=summary, allow_abbrev=False)
        if name == asked:
            module = importlib.import_module(path)
            module.configure(sub)
            sub.set_defaults(main=module.main)
    args = parser.parse_args(_with_negatives(words))
    try:
        status: int = args.main(args)
        sys.stdout.flush()
    except CommandError as error:
        print(f"{program} {asked}: {error}", file=sys.stderr)
        return error.code
    except BrokenPipeError:
        # The reader (head, less) has seen enough; what is buffered has nowhere to go.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return COULD_NOT
    except KeyboardInterrupt:
        return COULD_NOT
    return status


def _with_negatives(words: Sequence[str]) -> list[str]:
    """``--shifts -1,0`` as ``--shifts=-1,0``: argparse would take the number for an option."""
    told: list[str] = []
    for word in words:
        before = told[-1] if told else ""
        if _NEGATIVE.match(word) and before.startswith("--") and "=" not in before:
            told[-1] = f"{before}={word}"
        else:
            told.append(word)
    return told
