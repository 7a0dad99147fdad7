"""Results of ``tune`` made by hand, as the report's tests need them: jar line 2, fixed figures.

Nothing here was worked out from a recording; a seeded generator gives the streams their texture.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from replay.tuning.result import (
    Alarm,
    Baseline,
    Delay,
    EventScore,
    Extrapolated,
    Grouping,
    Kind,
    Observed,
    Outline,
    Part,
    Quantile,
    Range,
    Refusal,
    Result,
    Setting,
    Shape,
    Source,
    StreamFound,
    Tail,
    Together,
    Wander,
)

HOUR, DAY = 3_600.0, 86_400.0
START = 1_772_431_200_000_000  # 2026-03-02 06:00 UTC
END = START + int(3 * DAY * 1e6)
SPLIT = START + int(0.6 * 3 * DAY * 1e6)
PROOF = 27 * HOUR
HEADS = tuple(f"head={head};lane=1" for head in range(1, 7))
DETECTORS: tuple[tuple[Kind, str], ...] = (
    ("cusum", "mean"),
    ("ewma", "mean"),
    ("shewhart", "mean"),
    ("cusum", "variance"),
)
DRIFTS: tuple[tuple[Shape, float], ...] = (
    ("step", 1.5),
    ("step", 3.0),
    ("ramp", 1.5),
    ("spread", 1.5),
)
FRAGMENT = """characteristics:
  net-weight:
    subgroup: {size: 5}
    baseline: {mean: 341.2, sigma: 1.9, sigma_between: 0.4}
    detectors:
      - {kind: cusum, k: 0.51, h: 11.2, clip: 3}
"""


def trustworthy(settings: int = 14) -> Result:
    """Three days of six heads, and a best setting among ``settings``."""
    return Result(
        characteristic="net-weight",
        title="Net weight, 340 g jar",
        unit="g",
        sources=(Source("week-10.csv.gz", "9f" * 32),),
        seed=1,
        promise=14 * DAY,
        catch=(1.5, 3.0),
        ignore=(0.3,),
        ratio=1.5,
        ramp=600,
        resolution=0.1,
        whole=Part(START, END, 68 * HOUR, 2_448_000),
        fit=Part(START, SPLIT - 600_000_000, 41 * HOUR, 1_468_000),
        proof=Part(SPLIT, END, PROOF, 974_000),
        set_aside=(("not-used", 812), ("repeated", 40)),
        streams=tuple(_stream(head, number) for number, head in enumerate(HEADS)),
        groupings=(_grouping(5, wanders=False), _grouping(1, wanders=False)),
        settings=tuple(_setting(place) for place in range(settings)),
        refusals=(
            Refusal(
                "an interval for shewhart-mean-1-6",
                "it is more than 50 times the last part of the recording",
                "record for longer, or promise less",
            ),
        ),
        trust="Yes: 68 h of six streams keep to their centres, and subgroups are nearly "
        "independent.",
        trusted=True,
        with_care=False,
        best=0,
        best_spread=None,
        together=_together(),
        proposed=None,
        fragment=FRAGMENT,
        notes=("It replaces cusum and keeps shewhart-mean.",),
        events=0,
    )


def refused() -> Result:
    """The same streams wandering: no interval, no best setting."""
    whole = trustworthy()
    settings = tuple(
        replace(
            setting,
            observed=Observed(setting.observed.alarms, setting.observed.seconds, None),
            extrapolated=None,
            no_interval="the process wanders",
            tail=None,
            curve=(),
            meets=False,
            rank=None,
            unranked="the process wanders",
        )
        for setting in whole.settings
    )
    return replace(
        whole,
        groupings=(_grouping(5, wanders=True), _grouping(1, wanders=True)),
        settings=settings,
        refusals=(
            Refusal(
                "any interval with subgroups of 5 readings",
                "the process wanders: means of 200 subgroups vary 3 times as much as means of 50",
                "give the wander as ignore, or find what moves the process",
            ),
            Refusal(
                "subgroups of 100",
                "the first part holds too few of them",
                "record for at least a week",
            ),
        ),
        trust="No: the process wanders, so that no false-alarm interval can be promised.",
        trusted=False,
        best=None,
        together=replace(
            _together(),
            observed=Observed(3, PROOF, None),
            extrapolated=None,
            no_interval="the process wanders",
            meets=False,
        ),
        fragment="",
        notes=(),
    )


def with_events() -> Result:
    """The trustworthy one, with labelled events."""
    whole = trustworthy()
    scores = [
        EventScore(9, 0, None, None, 14, 14)
        if place == 5
        else EventScore(9, 9 - place // 3, 41.0, 132.0, 14, 12)
        for place in range(len(whole.settings))
    ]
    settings = tuple(
        replace(setting, events=score)
        for setting, score in zip(whole.settings, scores, strict=True)
    )
    return replace(whole, settings=settings, events=23)


def _stream(name: str, number: int) -> StreamFound:
    noise = np.random.default_rng(number)
    times = np.linspace(START, END, 300).astype(int)
    paused = (times > START + 16 * HOUR * 1e6) & (times < START + 20 * HOUR * 1e6)
    times = times[~paused]
    mean = 341.2 + 0.1 * number + 0.12 * noise.standard_normal(len(times))
    half = 4.4 + 0.2 * noise.standard_normal(len(times))
    outline = Outline(
        tuple(times.tolist()),
        tuple(mean.tolist()),
        tuple((mean - half).tolist()),
        tuple((mean + half).tolist()),
    )
    return StreamFound(name, 408_000, outline)


def _grouping(size: int, wanders: bool) -> Grouping:
    lengths = (1, 2, 5, 10, 20, 50, 100, 200, 500)
    ratios = tuple(m**0.8 if wanders else 1.4 - 0.4 / m for m in lengths)
    gone = 1.1 if wanders else 0.05
    return Grouping(
        size=size,
        said=f"subgroups of {size} readings" if size > 1 else "single readings",
        fit=1_468_000 // size,
        proof=974_000 // size,
        rate=10.0 / size,
        correlation=0.62 if wanders else 0.06,
        wander=Wander(lengths, ratios, ratios[7] / ratios[5], 1.5, wanders),
        supports=0.0 if wanders else 50 * PROOF,
        baselines=tuple(
            Baseline(head, 341.2 + 0.1 * number, 1.9, 0.4, 341.2 + 0.1 * number + gone)
            for number, head in enumerate(HEADS)
        ),
    )


def _setting(place: int) -> Setting:
    kind, chart = DETECTORS[place % 4]
    constants = {
        "cusum": (("k", 0.51), ("h", 11.2 + place / 10), ("clip", 3.0)),
        "ewma": (("lambda", 0.08), ("width", 4.9), ("clip", 3.0)),
        "shewhart": (("width", 5.21),),
    }[kind]
    meets = place < 5
    alarms = tuple(
        Alarm(
            time=SPLIT + int((number + 0.5) * PROOF / place * 1e6),
            stream=HEADS[(number + place) % 6],
            direction="down" if number % 2 else "up",
        )
        for number in range(place)
    )
    counted = Range(0.4 * PROOF / place, 2.4 * PROOF / place) if place else Range(PROOF / 3, None)
    seconds = 40 * DAY / (1 + place**1.3)
    extrapolated, tail = None, None
    if place % 7 != 6:
        extrapolated = Extrapolated(seconds, 2.1, Range(seconds / 2.1, seconds * 2.1))
        tail = _tail(place)
    sizes = (0.4, 0.75, 1.0, 1.5, 2.0, 3.0, 4.0) if place < 3 else ()
    return Setting(
        name=f"{kind}-{chart}-{5 if place % 3 else 1}-{place}",
        kind=kind,
        chart=chart,
        origin="configured" if place == 11 else "calibrated",
        grouping=0 if place % 3 else 1,
        constants=constants,
        catch=None if kind == "shewhart" else 1.5,
        ignore=0.3 if kind == "cusum" else None,
        observed=Observed(place, PROOF, counted),
        extrapolated=extrapolated,
        no_interval="" if extrapolated else "more than 50 times the recording",
        tail=tail,
        delays=tuple(_delay(shape, amount, place) for shape, amount in DRIFTS),
        curve=tuple(_delay("step", size, place) for size in sizes),
        events=None,
        alarms=alarms,
        asked=14 * DAY,
        meets=meets,
        rank=place + 1 if meets else None,
        unranked="" if meets else "the lower end of its interval is shorter than the promise",
    )


def _together() -> Together:
    """Three detectors that rang three times: twice on head 2, once without a direction."""
    alarms = tuple(
        Alarm(SPLIT + int(share * PROOF * 1e6), HEADS[head], direction)
        for share, head, direction in ((0.2, 1, "up"), (0.5, 1, "down"), (0.8, 4, None))
    )
    seconds = 0.99 * PROOF
    return Together(
        name="all configured detectors together",
        detectors=("cusum", "shewhart-mean", "cusum-variance"),
        unfollowed=(),
        grouping=0,
        observed=Observed(3, seconds, Range(seconds / 7.75, seconds / 0.82)),
        signals=7,
        standing=0.01,
        extrapolated=Extrapolated(0.4 * DAY, 2.5, Range(0.16 * DAY, 0.9 * DAY)),
        no_interval="",
        delays=tuple(_delay(shape, amount, 4) for shape, amount in DRIFTS),
        curve=(),
        events=None,
        alarms=alarms,
        asked=14 * DAY,
        meets=False,
    )


def _tail(place: int) -> Tail:
    levels = tuple(5 + 0.04 * number for number in range(150))
    scale, rate = 0.9, 2e-3
    rates = tuple(
        rate * math.exp(-(level - 6) / scale) * (1 + 0.1 * math.sin(9 * level)) for level in levels
    )
    return Tail(levels, rates, 11.2 + place / 10, 6.0, rate, scale, "level")


def _delay(shape: Shape, amount: float, place: int) -> Delay:
    least = 70 * (1.5 / amount) ** 1.4
    median = least * (1 + place / 12)
    late = 1.9 * median

    def around(value: float) -> Quantile:
        return Quantile(value, Range(0.9 * value, 1.15 * value))

    lost, gone = amount < 0.5, Quantile(None, None)
    return Delay(
        shape=shape,
        amount=amount,
        onsets=240,
        caught=128 if lost else 240 if amount > 1 else 236,
        horizon=3_000,
        median_readings=around(median),
        late_readings=gone if lost else around(late),
        median_seconds=around(median * 0.6),
        late_seconds=gone if lost else around(late * 0.6),
        floor_readings=0.85 * least if shape == "step" else None,
        floor_seconds=0.51 * least if shape == "step" else None,
    )
