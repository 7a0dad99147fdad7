"""How long ``driftbell-replay tune`` takes, against one ``driftbell-replay play`` of the same file.

    python tests/bench/tune.py [--messages 1000000] [--rounds 3]

It writes messages of six fill heads, plays them once through the configuration's detectors, and
judges 200 settings on them: the wall time of both commands, their starts included, one after the
other in each round, and the most memory that tuning held. The aim is a ratio of 5 or less, and less
than 1 GB.
"""

from __future__ import annotations

import argparse
import json
import statistics
import subprocess
import sys
import tempfile
from pathlib import Path
from time import perf_counter

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))
sys.path.insert(0, str(Path(__file__).parent))

from play import CONFIG, messages  # noqa: E402

from monitor.recording_lines import write_jsonl  # noqa: E402

CATCH = [f"{0.6 + 0.1 * step:.1f}" for step in range(16)]
ARGUMENTS = [
    "--catch", ",".join(CATCH), "--ignore", "0,0.3", "--size", "3,5,10",
    "--false-alarm-every", "7d",
    *(word for h in (6, 8, 10, 12) for word in ("--cusum", f"0.5,{h}")),
]  # fmt: skip
SETTINGS = 200
"""16 drifts, two to ignore, two kinds, three sizes; three Shewhart charts, twelve given CUSUMs."""


def timed(command: list[str]) -> tuple[float, bytes]:
    started = perf_counter()
    out = subprocess.run(command, cwd=ROOT, capture_output=True, check=True).stdout
    return perf_counter() - started, out


def tune(config: Path, recording: Path) -> tuple[float, float, int]:
    """Seconds, megabytes, settings; in a child of its own, whose memory is asked for at its end."""
    code = (
        "import resource, sys; from replay.__main__ import main; status = main(sys.argv[1:]); "
        "print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss, file=sys.stderr); "
        "sys.exit(status)"
    )
    command = [sys.executable, "-c", code, "tune", str(config), str(recording), "--json"]
    started = perf_counter()
    done = subprocess.run([*command, *ARGUMENTS], cwd=ROOT, capture_output=True, check=True)
    seconds = perf_counter() - started
    kilobytes = int(done.stderr.split()[-1])
    return seconds, kilobytes / 1_000, len(json.loads(done.stdout)["settings"])


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--messages", type=int, default=1_000_000)
    parser.add_argument("--rounds", type=int, default=3)
    args = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        config, recording = Path(folder, "line.yaml"), Path(folder, "line.jsonl")
        config.write_text(CONFIG)
        with recording.open("wb") as file:
            write_jsonl(file, messages(args.messages))
        ratios = []
        for number in range(1, args.rounds + 1):
            command = [
                sys.executable,
                "-m",
                "replay",
                "play",
                str(config),
                str(recording),
                "--json",
            ]
            played, _ = timed(command)
            tuned, memory, settings = tune(config, recording)
            if settings < SETTINGS:
                raise SystemExit(f"only {settings} settings were judged")
            ratios.append(tuned / played)
            print(
                f"round {number}: play {played:.2f} s, tune {tuned:.2f} s for {settings} settings, "
                f"ratio {ratios[-1]:.2f}; {memory:.0f} MB at most"
            )
    print(f"ratio: median {statistics.median(ratios):.2f}, best {min(ratios):.2f}")


if __name__ == "__main__":
    main()
