"""``driftbell-replay send``: its arguments, its progress and what it prints.

Knows the terminal. Must not know MQTT or file formats.
"""

from __future__ import annotations

import argparse
import math
import signal
import sys
import time
from pathlib import Path

import orjson

from monitor import secrets_file, times
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError, broker_address
from monitor.progress import Progress
from replay.recordings import Recording
from replay.send import Sent, send
from replay.sending import Sender, SendingError


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument(
        "recording",
        metavar="RECORDING",
        help="messages (.jsonl, .jsonl.gz) or a journal (.db)",
    )
    parser.add_argument(
        "--broker", metavar="HOST:PORT", type=broker_address, required=True, help="where to publish"
    )
    parser.add_argument(
        "--speed",
        metavar="10",
        default="1",
        help="so many times as fast as the messages arrived, or max: as fast as the broker takes "
        "them (default 1)",
    )
    parser.add_argument("--username", metavar="NAME", help="who we are at the broker")
    parser.add_argument(
        "--password-file", metavar="FILE", help="a file that holds the password and nothing else"
    )
    parser.add_argument("--json", action="store_true", help="one JSON object on stdout at the end")


def main(args: argparse.Namespace) -> int:
    """Send the recording; 1 where not all of it was taken over by the broker."""
    speed = _speed(args.speed)
    password = _password(args)
    recording = Recording(args.recording)
    if recording.rows:
        raise CommandError(
            f"{recording.path} is a table of readings, and a broker takes messages: "
            "send a .jsonl or a .db",
            WRONG,
        )
    progress, sent = Progress(), Sent()

    def stop(*_: object) -> None:
        sent.stopping = True

    def idle() -> None:
        # Here, and not wherever a signal comes: in the middle of a message nobody could count it.
        if sent.stopping:
            raise KeyboardInterrupt
        progress(lambda: _how_far(recording, sent))

    # Whoever ends us wants to be told how far it came, too.
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, stop)
    host, port = args.broker
    sender = Sender(host, port, args.username, password, idle)
    started, stopped = time.monotonic(), ""
    try:
        sender.connect()
        send(recording, sender, speed, sent)
        sender.finish()
    except SendingError as error:
        if not sender.taken:
            raise CommandError(str(error)) from None
        stopped = str(error)
    except KeyboardInterrupt:
        sender.abandon()
        stopped = "stopped"
    finally:
        progress.clear()
    _report(args, recording, sent, sender, time.monotonic() - started, stopped)
    return COULD_NOT if stopped or (sent.wrong and not sent.messages) else DONE


def _report(
    args: argparse.Namespace,
    recording: Recording,
    sent: Sent,
    sender: Sender,
    seconds: float,
    stopped: str,
) -> None:
    for line in sent.wrong_at:
        print(line, file=sys.stderr)
    more = sent.wrong - len(sent.wrong_at)
    if more:
        print(f"… and {more:,} more lines that could not be sent", file=sys.stderr)
    if stopped:
        print(
            f"driftbell-replay send: {stopped}: the broker has taken over {sender.taken:,} "
            f"messages; the last one sent stands at {recording.path}:{sent.line}",
            file=sys.stderr,
        )
    if args.json:
        report = {
            "messages": sender.taken,
            "control": sent.control,
            "unsent": sent.wrong,
            "reconnects": sender.reconnects,
            "line": sent.line,
            "seconds": round(seconds, 6),
        }
        sys.stdout.buffer.write(orjson.dumps(report, option=orjson.OPT_APPEND_NEWLINE))
    elif not stopped:
        control = f"; skipped {sent.control:,} control lines" if sent.control else ""
        again = f"; connected again {sender.reconnects} times" if sender.reconnects else ""
        what = f"{sender.taken:,} messages of {recording.path}"
        print(f"Sent {what} in {seconds:.1f} s{control}{again}.")


def _how_far(recording: Recording, sent: Sent) -> str:
    fraction = recording.fraction()
    part = f" {fraction:.0%}," if fraction else ""
    at = "" if sent.at is None else f", arrived {times.format_time(sent.at)}"
    return f"{recording.path}:{part} line {sent.line:,}{at}"


def _speed(text: str) -> float | None:
    if text == "max":
        return None
    try:
        speed = float(text)
    except ValueError:
        speed = math.nan
    if not 0 < speed < math.inf:
        raise CommandError(f"--speed {text}: write a number above 0, such as 10, or max", WRONG)
    return speed


def _password(args: argparse.Namespace) -> str | None:
    if args.password_file is None:
        return None
    if args.username is None:
        raise CommandError("--password-file goes with --username", WRONG)
    try:
        return secrets_file.read(Path(args.password_file))
    except ValueError as error:
        raise CommandError(f"--password-file {error}") from None
