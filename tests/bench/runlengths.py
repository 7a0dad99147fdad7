"""How long run lengths and their inverses take, against solving one system of 200 equations.

    python tests/bench/runlengths.py [--rounds 5]

The best of each in several rounds, in milliseconds and in solutions of that system by numpy. The
aim is less than 5 ms a run length and 50 ms an inverse on a machine where the system takes half a
millisecond.
"""

from __future__ import annotations

import argparse
import math
import sys
from collections.abc import Callable
from pathlib import Path
from time import perf_counter

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[2]))

from monitor.methods.runlength import cusum, ewma, shewhart, variance_cusum

INTERVALS = (500, 1e5, 2.4e6, 1e9, 1e12)


def weight_and_width(catch: float, ignore: float, interval: float) -> tuple[float, float]:
    lam = ewma.best_weight(catch, interval, ignore)
    return lam, ewma.width_for(lam, interval, ignore)


def high_interval(k: float, interval: float, head_start: float) -> float:
    try:
        return cusum.decision_interval(k, interval, head_start=head_start)
    except ValueError:  # refused: that is to be soon as well
        return math.inf


def one_sided_width(catch: float, interval: float) -> float:
    lam = ewma.best_weight(catch, interval, direction="up")
    return ewma.width_for(lam, interval, direction="up")


def variance_interval(ratio: float, interval: float, nu: int) -> float:
    k = variance_cusum.reference_within(ratio, interval, nu)
    side = "up" if ratio > 1 else "down"
    return variance_cusum.decision_interval(k, interval, nu=nu, side=side)  # type: ignore[arg-type]


def inverses() -> dict[str, Callable[[], object]]:
    work: dict[str, Callable[[], object]] = {}
    for n in INTERVALS:
        work[f"CUSUM for 0.3 SE, {n:g}"] = lambda n=n: cusum.decision_interval(0.15, n)
        work[f"CUSUM for 1 SE, clip 3, {n:g}"] = lambda n=n: cusum.decision_interval(
            0.5, n, clip=3.0
        )
        for catch, ignore in ((0.3, 0.05), (0.5, 0.0), (1.0, 0.2), (2.0, 0.0)):
            work[f"EWMA for {catch:g} SE, {ignore:g} ignored, {n:g}"] = (
                lambda n=n, c=catch, e=ignore: weight_and_width(c, e, n)
            )
        work[f"EWMA for 0.3 SE, one side, {n:g}"] = lambda n=n: one_sided_width(0.3, n)
        for lam in (0.01, 0.05, 0.2):
            work[f"EWMA {lam:g}, clip 3, {n:g}"] = lambda n=n, lam=lam: ewma.width_for(
                lam, n, clip=3.0
            )
        for k, head_start in ((0.05, 0.75), (0.1, 0.9)):
            work[f"CUSUM {k:g} from a head start of {head_start:g}, {n:g}"] = (
                lambda n=n, k=k, s=head_start: high_interval(k, n, s)
            )
        for ratio, nu in ((0.8, 4), (1.1, 4), (1.5, 1), (1.5, 4), (2.0, 9)):
            work[f"variance CUSUM for {ratio:g} times, {nu + 1} readings, {n:g}"] = (
                lambda n=n, r=ratio, nu=nu: variance_interval(r, n, nu)
            )
    return work


def run_lengths() -> dict[str, Callable[[], object]]:
    work: dict[str, Callable[[], object]] = {
        "Shewhart": lambda: shewhart.run_length(3, 1.0),
        "variance CUSUM for 1.5 times, 5 readings": lambda: variance_cusum.run_length(
            1.4, 12.0, nu=4
        ),
    }
    for k, h in ((0.5, 5.0), (0.25, 24.0), (0.1, 60.0)):
        work[f"CUSUM {k:g}, {h:g}"] = lambda k=k, h=h: cusum.run_length(k, h)
        work[f"CUSUM {k:g}, {h:g}, clip 3"] = lambda k=k, h=h: cusum.run_length(k, h, clip=3.0)
    for k, h, head_start in ((0.02, 60.0, 0.9), (0.05, 60.0, 0.75), (0.1, 40.0, 0.9)):
        work[f"CUSUM {k:g}, {h:g}, head start {head_start:g}"] = lambda k=k, h=h, s=head_start: (
            cusum.run_length(k, h, head_start=s)
        )
    for lam, width, shift in (
        (0.01, 3.0, 0.0),
        (0.05, 2.7, 0.0),
        (0.05, 2.7, 2.0),
        (0.2, 3.0, 0.0),
    ):
        for asymptotic in (True, False):
            limits = "asymptotic" if asymptotic else "exact"
            work[f"EWMA {lam:g}, {width:g}, clip 3, shift {shift:g}, {limits}"] = (
                lambda lam=lam, w=width, d=shift, a=asymptotic: ewma.run_length(
                    lam, w, d, asymptotic=a, clip=3.0
                )
            )
    for lam, width in ((0.005, 4.5), (0.02, 5.0), (0.1, 2.814), (0.2, 6.0)):
        for asymptotic in (True, False):
            limits = "asymptotic" if asymptotic else "exact"
            work[f"EWMA {lam:g}, {width:g}, {limits}"] = lambda lam=lam, w=width, a=asymptotic: (
                ewma.run_length(lam, w, asymptotic=a)
            )
    return work


def best(work: Callable[[], object], rounds: int) -> float:
    """Milliseconds."""
    times = []
    for _ in range(rounds):
        started = perf_counter()
        work()
        times.append(perf_counter() - started)
    return 1000 * min(times)


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawTextHelpFormatter
    )
    parser.add_argument("--rounds", type=int, default=5)
    rounds = parser.parse_args().rounds
    matrix = np.random.default_rng(1).normal(size=(200, 200))
    yardstick = best(lambda: np.linalg.solve(matrix, np.ones(200)), 20 * rounds)
    print(f"200 equations: {yardstick:.2f} ms")
    for title, works in (("run lengths", run_lengths()), ("inverses", inverses())):
        slowest = (-math.inf, "")
        print(title)
        for name, work in works.items():
            took = best(work, rounds)
            slowest = max(slowest, (took, name))
            print(f"  {name:50s} {took:8.2f} ms {took / yardstick:8.1f}")
        print(f"  the slowest: {slowest[1]}, {slowest[0]:.1f} ms")


if __name__ == "__main__":
    main()
