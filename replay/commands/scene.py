"""``driftbell-replay scene``: a story of the demo line, written as a recording.

Knows the command's arguments. The messages are those that ``driftbell demo`` sends.
"""

from __future__ import annotations

import argparse
import sys

import orjson

from monitor import files
from monitor.commandline import DONE, WRONG, CommandError
from monitor.demo import line, telling
from monitor.demo.scenes import SCENES
from monitor.demo.score import as_json
from monitor.demo.telling import Clock
from monitor.recording_lines import write_jsonl


def configure(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    width = max(map(len, SCENES))
    parser.epilog = "scenes:\n" + "\n".join(
        f"  {scene.name:{width}}  {scene.title} ({scene.seconds / 60:.0f} min)"
        for scene in SCENES.values()
    )
    parser.add_argument("name", metavar="NAME", choices=SCENES, help="one of the scenes below")
    parser.add_argument(
        "--to", required=True, metavar="FILE", help="FILE.jsonl or FILE.jsonl.gz; - is stdout"
    )
    parser.add_argument(
        "--seed", type=int, default=1, metavar="N", help="the same N, the same bytes (default 1)"
    )
    parser.add_argument(
        "--minutes", type=float, metavar="N", help="minutes of line time (default: the scene's own)"
    )
    parser.add_argument(
        "--json", action="store_true", help="say what was put in as one JSON object"
    )


def main(args: argparse.Namespace) -> int:
    """Write the recording."""
    if args.seed < 0:
        raise CommandError(f"--seed {args.seed}: write 0 or more", WRONG)
    if args.to != files.STDOUT and not args.to.endswith((".jsonl", ".jsonl.gz")):
        raise CommandError(f"--to {args.to}: the name must end in .jsonl or .jsonl.gz", WRONG)
    scene = SCENES[args.name]
    seconds = scene.seconds if args.minutes is None else args.minutes * 60
    if not 0 < seconds < float("inf"):
        raise CommandError(f"--minutes {args.minutes:g}: write more than 0", WRONG)
    with files.replacing(args.to) as file:
        count = write_jsonl(file, line.messages(scene, args.seed, seconds=seconds))
    causes = [cause for cause in scene.causes if cause.onset < seconds]
    if args.json:
        report = {"scene": scene.name, "seed": args.seed, "messages": count}
        put_in = [as_json(cause, line.START) for cause in causes]
        said = orjson.dumps({**report, "causes": put_in}).decode()
    else:
        clock = Clock(line.START, seconds, speed=1.0)
        lines = [f"  {telling.put_in(cause, clock)}" for cause in causes]
        said = "\n".join([f"{args.to}: {count:,} messages; {scene.title}", *lines])
    # Where the recording itself goes to stdout, what is said of it cannot.
    print(said, file=sys.stderr if args.to == files.STDOUT else sys.stdout)
    return DONE
