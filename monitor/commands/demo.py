"""``driftbell demo``: a simulated jar line, a broker and the daemon together, told as they go.

Knows how the demo is paced and what its reader asks: which gauge, what changed, since when, by how
much, what to do; then what was missed, what was false, and what to try next.
"""

from __future__ import annotations

import argparse
import contextlib
import signal
import sys
import tempfile
import time
from dataclasses import replace
from pathlib import Path

import orjson

from monitor import times
from monitor.commandline import COULD_NOT, DONE, WRONG, CommandError, broker_address
from monitor.demo import line, telling
from monitor.demo.broker import HOST, BrokerError, EmbeddedBroker
from monitor.demo.scenes import SCENES
from monitor.demo.score import Finding, as_json, score
from monitor.demo.session import Session, SessionError
from monitor.demo.telling import Clock
from monitor.messages import AlertEvent, CountsField
from monitor.progress import Progress

SCENE = SCENES["demo"]
SHORTEST = 5.0  # seconds; in less, the line would outrun a small computer


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument(
        "--seconds",
        type=float,
        default=20.0,
        metavar="N",
        help=f"how long the line runs (default 20, at least {SHORTEST:.0f}): its"
        f" {SCENE.seconds / 60:.0f} minutes pass faster than the clock; from {SCENE.seconds:.0f}"
        " on, it runs as the clock does",
    )
    parser.add_argument(
        "--broker",
        type=broker_address,
        metavar="HOST:PORT",
        help="use this MQTT broker, under a topic of our own, instead of the embedded one",
    )
    parser.add_argument(
        "--seed", type=int, default=1, metavar="N", help="another seed, other readings (default 1)"
    )
    parser.add_argument(
        "--json", action="store_true", help="one JSON object on stdout at the end, nothing before"
    )


def main(args: argparse.Namespace) -> int:
    """Run it: 0 when every cause was found, or somebody stopped it."""
    if not SHORTEST <= args.seconds < float("inf"):
        raise CommandError(f"--seconds {args.seconds:g}: write {SHORTEST:.0f} or more", WRONG)
    if args.seed < 0:
        raise CommandError(f"--seed {args.seed}: write 0 or more", WRONG)
    # Whoever ends us wants the daemon ended and the broker left clean, too.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    folder = Path(tempfile.mkdtemp(prefix="driftbell-demo-"))
    tell = _Teller(silent=args.json)
    interrupted = False
    try:
        with contextlib.ExitStack() as stack:
            if args.broker is None:
                embedded = stack.enter_context(EmbeddedBroker(folder / "broker.log"))
                host, port, prefix = HOST, embedded.port, line.PREFIX
            else:
                host, port = args.broker
                prefix = f"{folder.name}/jar-line-2"
            session = stack.enter_context(Session(folder, host, port, prefix))
            kind = "embedded" if args.broker is None else "yours"
            run = _Run(session, prefix, args.seed, args.seconds, tell)
            # Between two messages, and not wherever it comes: in the middle of one, what the
            # client holds could not be put in order any more.
            for number in (signal.SIGINT, signal.SIGTERM):
                signal.signal(number, run.stop)
            tell(telling.opening(SCENE, run.clock, f"{kind}, {host}:{port}", folder))
            interrupted = not run.play()
        run.hear_rest()
    except (BrokerError, SessionError) as error:
        tell.progress.clear()
        raise CommandError(str(error)) from None
    findings, false = score(SCENE.causes, run.raised)
    stopped = run.reached if interrupted else None
    tell(telling.closing(findings, false, run.clock, stopped, run.sent, session.counts))
    tell(telling.next_steps(session.configuration, session.journal))
    if args.json:
        report = _report(args, folder, run, findings, false, session.counts, interrupted)
        sys.stdout.write(orjson.dumps(report).decode() + "\n")
    return DONE if interrupted or all(finding.alert for finding in findings) else COULD_NOT


class _Teller:
    """Standard output for people, with the progress below it where standard error is a terminal."""

    def __init__(self, *, silent: bool) -> None:
        self._silent = silent
        self.progress = Progress(at_once=True)

    def __call__(self, text: str = "") -> None:
        self.progress.clear()
        if not self._silent:
            print(text, flush=True)


class _Run:
    """One run of the line: sends what is due, and hears what the daemon says meanwhile."""

    def __init__(
        self, session: Session, prefix: str, seed: int, seconds: float, tell: _Teller
    ) -> None:
        of_line = max(SCENE.seconds, seconds)
        # The line's clock ends at now: a reading from the future would be set aside.
        start = times.SECOND * int(time.time() + seconds - of_line)
        self.clock = Clock(start, of_line, speed=of_line / seconds)
        self.sent = 0
        self.reached = 0.0  # seconds of line time
        self.raised: list[AlertEvent] = []
        self._stopping = False
        self._session = session
        self._tell = tell
        self._messages = line.messages(SCENE, seed, start=start, seconds=of_line, prefix=prefix)

    def stop(self, *_: object) -> None:
        """End before the next message (a signal handler)."""
        self._stopping = True

    def play(self) -> bool:
        """Send the scene at its pace, and wait until the daemon has read all of it.

        False where it was stopped.
        """
        begun = time.monotonic()
        self.clock = replace(self.clock, begun=time.time_ns() // 1_000)
        for message in self._messages:
            if self._stopping:
                return False
            elapsed = (message.time - self.clock.start) / times.SECOND
            while self._hear(begun + elapsed / self.clock.speed - time.monotonic()):
                pass
            self._session.check()
            self._session.publish(message)
            self.sent += 1
            self.reached = elapsed
            self._tell.progress(lambda: telling.progress(self.reached, self.clock, self.sent))
        self._session.await_read(self.sent)
        return True

    def hear_rest(self) -> None:
        """Hear what has already come."""
        while self._hear(0.0):
            pass

    def _hear(self, timeout: float) -> bool:
        event = self._session.event(timeout)
        if event is None:
            return False
        if event["event"] == "raised":
            self.raised.append(event)
        if event["event"] != "updated":  # another rule agreeing is no news to a person
            self._tell(telling.alert(event, self.clock))
        return True


def _report(
    args: argparse.Namespace,
    folder: Path,
    run: _Run,
    findings: list[Finding],
    false: list[AlertEvent],
    counts: CountsField | None,
    interrupted: bool,
) -> dict[str, object]:
    return {
        "scene": SCENE.name,
        "seed": args.seed,
        "seconds": args.seconds,
        "line_seconds": round(run.reached, 1),
        "interrupted": interrupted,
        "folder": str(folder),
        "messages": {
            "sent": run.sent,
            "read": counts and counts["messages"],
            "set_aside": counts and counts["set_aside"],
        },
        "causes": [
            {
                **as_json(finding.cause, run.clock.start),
                "found": finding.alert is not None,
                "alert": finding.alert and finding.alert["id"],
                "seconds": finding.seconds,
                "readings": finding.readings,
                "mean_shift": finding.size,
                "estimate": finding.said,
            }
            for finding in findings
        ],
        "false_alarms": false,
    }
