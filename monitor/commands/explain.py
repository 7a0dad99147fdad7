"""``driftbell explain``: why one alert rang.

Knows the command line and the terminal. Must not know journals, or how an alert is derived again.
"""

from __future__ import annotations

import argparse
import sqlite3
import sys
from contextlib import closing
from pathlib import Path

import orjson

from monitor.background import Background
from monitor.commandline import DONE, CommandError
from monitor.explaining import explain_json, explain_words
from monitor.explaining.alert_log import NoSuchAlertError
from monitor.explaining.explain import explain
from monitor.journal import JournalError, is_in_use, open_reader
from monitor.progress import Counter


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("journal", metavar="JOURNAL", help="the daemon's journal (.db)")
    parser.add_argument(
        "alert", metavar="ALERT_ID", help="the alert's id, or its first digits: four or more"
    )
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout")


def main(args: argparse.Namespace) -> int:
    """Print the explanation; 1 where there is no such alert."""
    background = Background(rests=is_in_use(Path(args.journal)))
    progress = Counter("entries folded again")

    def folding() -> None:
        progress()
        background()

    try:
        with closing(open_reader(Path(args.journal))) as db:
            told = explain(db, args.alert, folding)
    except (JournalError, NoSuchAlertError, ValueError) as error:
        raise CommandError(str(error)) from error
    except sqlite3.Error as error:
        raise CommandError(f"cannot read {args.journal}: {error}") from error
    finally:
        progress.clear()
    if args.json:
        sys.stdout.buffer.write(orjson.dumps(explain_json.document(told), option=_OPTIONS))
    else:
        print("\n".join(explain_words.lines(told)))
    return DONE


_OPTIONS = orjson.OPT_INDENT_2 | orjson.OPT_APPEND_NEWLINE
