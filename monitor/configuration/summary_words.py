"""A plan's summary in words, for the engineer who will put it on the line.

Knows plain words, and how many digits are worth showing. Must not know how a figure was worked out.
"""

from __future__ import annotations

import json
import math
import textwrap
from collections.abc import Iterator
from typing import Any

from monitor import times, units
from monitor.configuration import spans
from monitor.configuration.sections.base import either

_WIDTH = 100
_LABEL = 14
_USELESS = 30 * 86_400.0  # seconds
_BOUND = "\u00a0"  # no line is broken here; it is printed as a plain space

Summary = dict[str, Any]


def lines(plan: Summary) -> Iterator[str]:
    """What the whole plan does, line by line."""
    outputs = plan["outputs"]
    points = "every subgroup's points included" if outputs["points"] else "without points"
    yield ""
    yield from _entry("Broker", *_broker(plan["broker"]))
    yield from _entry("Publishes", f"under {outputs['root']}/, {points}")
    yield from _entry("Journal", plan["journal"])
    for each in plan["characteristics"]:
        yield ""
        yield from _Speaker(each).lines()
    yield ""
    yield from _entry("False alarms", *_false_alarms(plan["false_alarms"], plan["budget"]))
    for warning in plan["warnings"]:
        yield ""
        wrong, instead = warning["wrong"], warning["instead"]
        yield from _entry("Warning", f"{warning['key']} {wrong}", instead)


def _broker(broker: Summary) -> Iterator[str]:
    user = "" if broker["username"] is None else f", user {broker['username']}"
    yield f"{broker['host']}:{broker['port']}, client id {broker['client_id']}{user}"
    if broker["session_expiry"] is not None:
        kept = _duration(broker["session_expiry"])
        yield f"MQTT 5: it keeps messages for us while we are away, up to {kept}"
    if (tls := broker["tls"]) is not None:
        ours = tls["certificate"]
        shows = f"; we show {ours}" if ours else "; we show no certificate of our own"
        yield f"TLS: it must show a certificate signed by {tls['ca']}{shows}"


def _false_alarms(total: Summary, budget: Summary | None) -> Iterator[str]:
    if budget is not None:
        yield _budget(budget)
    hours = f"{total['seconds'] / 3_600:g} h"
    if total["together"] or not (total["each_stream"] or total["unknown"]):
        yield f"with nothing wrong, about {spans.number(total['together'])} in {hours} altogether"
    for name, rate in total["each_stream"].items():
        yield f"about {spans.number(rate)} in {hours} in each stream of {name}"
    for name, why in total["unknown"].items():
        yield f"not counted: {name}, which {why}"
    yield (
        "by the textbook, as above: for independent, normal readings that keep exactly to the "
        "baseline; most real ones ring more often"
    )


def _budget(budget: Summary) -> str:
    agreed = f"{budget['alerts']:g} in {_duration(budget['seconds'])}"
    foreseen = spans.number(budget["foreseen"])
    if budget["kept"] is None:
        return (
            f"whether the budget of {agreed} is kept cannot be told yet: about {foreseen} are "
            "foreseen of what can be counted"
        )
    if budget["kept"]:
        return f"within the budget of {agreed}: about {foreseen} are foreseen"
    return (
        f"ABOVE THE BUDGET of {agreed}: about {foreseen} are foreseen; promise longer intervals, "
        "or widen what rings most"
    )


def _entry(label: str, *sentences: str) -> Iterator[str]:
    """A label, and sentences beside it: each on lines of its own, wrapped where it is long, and
    indented as it begins."""
    for index, sentence in enumerate(sentences):
        inner = len(sentence) - len(sentence.lstrip(" "))
        wrapped = textwrap.fill(
            sentence,
            _WIDTH,
            initial_indent=(label if index == 0 else "").ljust(_LABEL),
            subsequent_indent=" " * (_LABEL + 2 + inner),
            break_long_words=False,
            break_on_hyphens=False,
        )
        yield wrapped.replace(_BOUND, " ")


class _Speaker:
    """Says one characteristic, in its unit and to the digits its standard error warrants."""

    def __init__(self, plan: Summary) -> None:
        self._plan = plan
        baselines = [*plan["by_stream"].values(), *filter(None, [plan["baseline"]])]
        error = min((baseline["standard_error"] for baseline in baselines), default=1.0)
        self._places = max(0, 1 - math.floor(math.log10(error)))
        self._unit = f"{_BOUND}{plan['unit']}" if plan["unit"] else ""

    def lines(self) -> Iterator[str]:
        plan = self._plan
        unit = f" ({plan['unit']})" if plan["unit"] else ""
        yield f"{plan['name']}: {plan['title']}{unit}"
        yield from _entry("  Reads", *self._source())
        yield from _entry("  Streams", self._streams())
        yield from _entry("  Subgroups", *self._subgroups())
        yield from _entry("  Baseline", *self._baseline())
        for detector in plan["detectors"]:
            yield from _entry("  Detector", *self._detector(detector))
        if plan["promise"]:
            yield from _entry("  Promise", self._promise(plan["promise"]))
        yield from _entry("  Alerts", *self._alerts())

    def _promise(self, promise: Summary) -> str:
        agreed = f"one false alarm in {_duration(promise['seconds'])}"
        if promise["kept"] is None:
            return f"{agreed}: whether it is kept cannot be told yet"
        foreseen = (
            "none is ever foreseen"
            if promise["never"]
            else f"one in {spans.long(promise['foreseen'])} is foreseen"
        )
        if promise["kept"]:
            return f"{agreed} of all its streams and detectors together: {foreseen}"
        return (
            f"BROKEN: {agreed} was agreed, {foreseen}; "
            "give the detectors that ring most wider constants or a smaller share"
        )

    def _number(self, value: float) -> str:
        if self._places > 9 or abs(value) >= 1e12:
            return f"{value:.6g}"
        return f"{value:.{self._places}f}"

    def _amount(self, value: float) -> str:
        return self._number(value) + self._unit

    def _squared(self, value: float) -> str:
        unit = units.of_chart("variance", self._plan["unit"])
        return f"{value:.4g}{_BOUND}{unit}" if unit else f"{value:.4g}"

    def _between_squares(self, limits: Summary) -> str:
        return f"{limits['lower']:.4g} to {self._squared(limits['upper'])}"

    def _between(self, limits: Summary) -> str:
        return f"{self._number(limits['lower'])} to {self._amount(limits['upper'])}"

    def _as_given(self, value: float) -> str:
        return f"{value:.12g}{self._unit}"

    # What is read

    def _source(self) -> Iterator[str]:
        source = self._plan["source"]
        if source["payload"] == "number":
            yield f"{source['topic']}: the payload is the number, its arrival is its time"
        else:
            time = f"time at {source['time']}" if source["time"] else "its arrival is its time"
            parts = [f"value at {source['value'] or 'the top'}", time]
            if sequence := source["sequence"]:
                again = f" (0 again after {sequence['wraps']} numbers)" if sequence["wraps"] else ""
                parts.append(f"sequence number at {sequence['value']}{again}")
            yield f"{source['topic']}: JSON, {', '.join(parts)}"
        for pointer, values in source["use_if"].items():
            allowed = either([json.dumps(value, ensure_ascii=False) for value in values])
            yield f"used only where {pointer} is {allowed}"
        lower, upper = source["plausible"]["lower"], source["plausible"]["upper"]
        sides = (("below", lower), ("above", upper))
        bounds = [f"{side} {self._as_given(v)}" for side, v in sides if v is not None]
        if bounds:
            yield f"set aside as implausible {either(bounds)}"

    def _streams(self) -> str:
        parts = [
            f"{key} ({place['value']})"
            if "value" in place
            else f"{key} (level {place['topic_level']} of the topic)"
            for key, place in self._plan["source"]["stream"].items()
        ]
        if not parts:
            return "one"
        *most, last = parts
        each = f"{', '.join(most)} and {last}" if most else last
        return f"one for each {each}, each judged on its own"

    def _subgroups(self) -> Iterator[str]:
        subgroup = self._plan["subgroup"]
        rate = self._plan["source"]["expected_rate"]
        yield from self._window() if "window" in subgroup else self._count()
        if rate is None:
            if subgroup["seconds"] is None:
                yield "without expected_rate nobody can say how long one takes"
            return
        at, takes = f"at {rate * 60:.6g} readings a minute", spans.short(subgroup["takes"])
        one_stream, every = not self._plan["source"]["stream"], subgroup.get("every")
        if "window" in subgroup:
            expected = subgroup["expected"]
            if expected is not None:
                yield f"{at}: about {spans.number(expected)} of one stream in each window"
        elif every is not None:
            takes = takes if one_stream else f"N × {takes} where N streams share the readings"
            yield f"{at} one takes {takes}"
        elif one_stream:
            yield f"{at}: one every {takes}"
        else:
            yield (
                f"{at} over all streams: one every {takes} in all, "
                f"{self._each(subgroup['takes'])} equally busy streams"
            )

    def _each(self, takes: float) -> str:
        count = self._plan["source"]["expected_streams"]
        if count is None:
            return f"every N × {spans.short(takes)} in each of N"
        return f"every {spans.short(count * takes)} in each of {count}"

    def _window(self) -> Iterator[str]:
        subgroup = self._plan["subgroup"]
        window, least, readings = (subgroup[key] for key in ("window", "min_size", "readings"))
        yield f"all readings of one stream in each {_duration(window)} of UTC"
        if least > 1:
            yield f"given up where they are fewer than {least}"
        shown = "a single reading" if readings == 1 else f"{readings} readings"
        yield f"the limits below are for {shown}; they move with the number"

    def _count(self) -> Iterator[str]:
        subgroup = self._plan["subgroup"]
        size, gap, every = (subgroup[key] for key in ("size", "max_gap", "every"))
        longest = None if gap is None else _duration(gap)
        if size == 1:
            what = "every reading" if every is None else "one reading"
            yield f"{what} is judged by itself"
        else:
            yield f"{size} consecutive readings of one stream"
        if every is not None:
            yield f"at most one every {_duration(every)}: readings between are counted, not judged"
        if size > 1 and longest:
            yield f"given up unfinished where two readings lie more than {longest} apart"
        elif longest and any(d["chart"] == "moving_range" for d in self._plan["detectors"]):
            yield f"no moving range reaches across more than {longest}"
        elif longest:
            yield f"max_gap {longest} has nothing to break up"

    # How it is judged

    def _baseline(self) -> Iterator[str]:
        plan = self._plan
        common, own, size = plan["baseline"], plan["by_stream"], plan["subgroup"]["readings"]
        if own:
            yield from self._own(list(own.values()), plan["limits_of"])
        if common:
            between = common["sigma_between"]
            extra = f", sigma_between {self._as_given(between)}" if between else ""
            of = "one reading" if size == 1 else f"a mean of {size}"
            yield (
                f"{'all other streams: ' if own else ''}mean {self._as_given(common['mean'])}, "
                f"sigma {self._as_given(common['sigma'])}{extra}; "
                f"standard error of {of}: {self._amount(common['standard_error'])}"
            )
        if learns := plan["learns"]:
            yield from self._learns(learns)
        if plan["origin"]:
            yield from self._origin(plan["origin"])
        if specification := plan["specification"]:
            given = [
                f"{key} {self._as_given(value)}"
                for key, value in specification.items()
                if value is not None
            ]
            yield f"specification {', '.join(given)}: shown with alerts, it moves no limit"

    def _learns(self, learns: Summary) -> Iterator[str]:
        over, count = _duration(learns["over_at_least"]), learns["subgroups"]
        yield (
            f"learned of each stream from {count:,} subgroups over {over} or more, and proposed on "
            f"{self._plan['baseline_topic']}"
        )
        if learns["adopt"]:
            detectors = ", ".join(learns["detectors"])
            yield f"one that may be trusted is judged by from then on, with {detectors}"
        if not (self._plan["baseline"] or self._plan["by_stream"]):
            until = "then" if learns["adopt"] else "one is written down here"
            yield f"until {until} nobody is rung, and what is wrong meanwhile becomes the usual"

    def _own(self, own: list[Summary], limits_of: str | None) -> Iterator[str]:
        means, sigmas = ([each[key] for each in own] for key in ("mean", "sigma"))
        have = "one stream has its" if len(own) == 1 else f"{len(own):,} streams have their"
        yield f"{have} own: mean {self._range(means)}, sigma {self._range(sigmas)}"
        if limits_of is not None:
            yield f"no other stream is judged; the limits below are those of {limits_of}"
        else:
            yield "the limits below are those of all other streams"

    def _range(self, values: list[float]) -> str:
        low, high = min(values), max(values)
        return self._as_given(low) if low == high else f"{low:.12g} to {self._as_given(high)}"

    def _origin(self, origin: Summary) -> Iterator[str]:
        names = [recording["name"] for recording in origin.get("recordings", ())]
        counts = [f"{n:,} {key.replace('_', ' ')}" for key, n in origin.get("counts", {}).items()]
        span = [f"{key} {origin[key]}" for key in ("first", "last") if key in origin]
        if said := ", ".join([*names, *counts, *span]):
            yield f"estimated from {said}"
        if note := origin.get("note"):
            yield f"its file says: {note}"

    def _detector(self, detector: Summary) -> Iterator[str]:
        only = {"both": "", "up": "; rises only", "down": "; falls only"}[detector["direction"]]
        size = self._plan["subgroup"]["readings"]
        charted = {
            "mean": f"mean of {size}",
            "median": f"median of {size}",
            "range": f"range of {size}",
            "sd": f"standard deviation of {size}",
            "variance": f"variance of {size}",
            "individual": "single reading",
            "moving_range": "moving range",
        }[detector["chart"]]
        say = {"shewhart": self._shewhart, "cusum": self._cusum, "ewma": self._ewma}
        if "sums" in detector:
            say["cusum"] = self._variance_cusum
        first, *more = say[detector["kind"]](detector, charted)
        yield f"{detector['name']}: {first}{only}"
        yield from (f"  {sentence}" for sentence in more)
        once = self._once(detector["false_alarm"])
        off = detector["intent"] and detector["intent"]["ignore"]
        wrong = f"while off by no more than {self._amount(off)}" if off else "with nothing wrong"
        yield f"  {wrong} it {'never rings' if once == 'never' else f'rings {once}'}"
        if detector["catches"]:
            yield f"  {self._catches(detector['catches'])}"

    def _catches(self, catches: Summary) -> str:
        what = (
            f"a spread {catches['ratio']:g} times the usual"
            if catches["drift"] is None
            else f"a lasting drift of {self._amount(catches['drift'])}"
        )
        delays = catches["half"], catches["nine_of_ten"]
        if (delays[1]["seconds"] or 0.0) > _USELESS:
            return f"does not catch {what} in any useful time: nine times in ten takes over 30 days"
        readings = [spans.number(max(1.0, each["pieces"])) for each in delays]
        if delays[0]["seconds"] is None:
            half, nine = f"{readings[0]} readings of its stream", readings[1]
        else:
            half, nine = (
                f"{_delay(each['seconds'])} ({count} readings)"
                for each, count in zip(delays, readings, strict=True)
            )
        return f"catches {what} within {half} half the time, within {nine} nine times in ten"

    def _once(self, false_alarm: Summary) -> str:
        subgroups, seconds = false_alarm["subgroups"], false_alarm["seconds"]
        if false_alarm["never"]:
            return "never"
        if subgroups is None:
            return "at intervals that are too much to compute"
        if seconds is None:
            return spans.once_among(subgroups, "subgroups")
        each = " in each stream" if self._plan["subgroup"]["each_stream"] else ""
        return spans.once(seconds, each, subgroups, "subgroups")

    def _shewhart(self, detector: Summary, charted: str) -> Iterator[str]:
        centre, limits = self._amount(detector["centre"]), self._between(detector)
        if detector["chart"] == "variance":
            centre, limits = self._squared(detector["centre"]), self._between_squares(detector)
        yield f"Shewhart chart of the {charted}, centre {centre}, limits {limits}"
        rules = detector["rules"]
        for rule in rules:
            once = f": {self._once(rule['false_alarm'])}" if len(rules) > 1 else ""
            yield f"{rule['rule']}: {self._rule(rule, detector)}{once}"

    def _rule(self, rule: Summary, detector: Summary) -> str:
        band, centre = "", detector["centre"]
        if "width" in rule:
            squares, wide = detector["chart"] == "variance", f"{rule['width']:.4g} standard errors"
            band = self._between_squares(rule) if squares else self._between(rule)
            exact = squares or detector["exact"]
            band += f" (crossed as rarely as {wide} by a mean)" if exact else f" (±{wide})"
        match rule["rule"]:
            case "outside":
                return f"one point outside {band}"
            case "zone":
                return f"{rule['count']} of the last {rule['of']} outside {band}, on one side"
            case "run":
                return f"{rule['length']} in a row on one side of {self._amount(centre)}"
            case "trend":
                return f"{rule['length']} in a row steadily rising or falling"
            case "alternation":
                return f"{rule['length']} in a row alternating up and down"
            case "stratification":
                return f"{rule['length']} in a row inside {band}"
            case _:
                return f"{rule['length']} in a row outside {band}, on either side"

    def _cusum(self, detector: Summary, charted: str) -> Iterator[str]:
        yield (
            f"CUSUM of the {charted}: what lies more than {self._amount(detector['slack'])} off "
            f"the centre is summed up, a sum above {self._amount(detector['limit'])} signals "
            f"(k {detector['k']:.4g}, h {detector['h']:.5g})"
        )
        if detector["intent"] is None:
            yield f"quickest for a lasting shift of {self._amount(detector['tuned_to'])}"
        if detector["start"]:
            sums = "both sums start" if detector["direction"] == "both" else "the sum starts"
            yield f"{sums} at {self._amount(detector['start'])}"
        yield from self._clip_and_after(detector, "the sum that signalled")

    def _variance_cusum(self, detector: Summary, charted: str) -> Iterator[str]:
        for each in detector["sums"]:
            beyond = "above" if each["statistic"] == "upper_sum" else "below"
            what = f"CUSUM of the {charted}: what" if each is detector["sums"][0] else "and what"
            yield (
                f"{what} lies {beyond} {self._squared(each['reference'])} is summed up, a sum "
                f"above {self._squared(each['limit'])} signals (k {each['k']:.4g}, h "
                f"{each['h']:.5g} times the usual variance); quickest for a spread "
                f"{each['tuned_to']:.3g} times the usual"
            )
        if detector["head_start"]:
            starts = " and ".join(self._squared(each["start"]) for each in detector["sums"])
            yield f"{'both sums start' if len(detector['sums']) > 1 else 'it starts'} at {starts}"
        goes = "starts again" if detector["after_signal"] == "restart" else "goes on as it is"
        yield f"after a signal the sum that signalled {goes}"

    def _ewma(self, detector: Summary, charted: str) -> Iterator[str]:
        first, settled = self._between(detector["first"]), self._between(detector["settled"])
        early = "" if first == settled else f", {first} at the first point"
        yield (
            f"EWMA of the {charted}, weight {detector['lambda']:.4g}: "
            f"signals outside {settled}{early}"
        )
        yield from self._clip_and_after(detector, "the average")

    def _clip_and_after(self, detector: Summary, what: str) -> Iterator[str]:
        if detector["clip"] is not None:
            reach = detector["clip"] * detector["standard_error"]
            yield f"no single point counts for more than {self._amount(reach)} off the centre"
        goes = "starts again" if detector["after_signal"] == "restart" else "goes on as it is"
        yield f"after a signal {what} {goes}"

    # Who hears of it

    def _alerts(self) -> Iterator[str]:
        plan = self._plan
        yield f"on {plan['alert_topic']}"
        priority, reaction = plan["priority"], plan["reaction"]
        sides = (("a rise", "up"), ("a fall", "down"), ("anything without a side", "other"))
        if len(set(priority.values())) == 1:
            yield f"priority {priority['up']}"
        else:
            yield "priority: " + ", ".join(f"{side} {priority[key]}" for side, key in sides)
        yield (
            f"open for at least {_duration(plan['off_delay'])}; ringing again within "
            f"{_duration(plan['rejoin'])} of its end continues the same alert"
        )
        if not any(reaction.values()):
            yield "no reaction is written down: whoever is rung must know what to do"
        elif len(set(reaction.values())) == 1:
            yield from (f"tells: {step}" for step in reaction["up"])
        else:
            for side, key in sides:
                yield f"on {side}: {' '.join(reaction[key]) or 'no reaction is written down'}"


def _delay(seconds: float) -> str:
    return spans.short(seconds) if seconds < 2 * 86_400 else spans.long(seconds)


def _duration(seconds: float) -> str:
    return times.format_duration(round(seconds * times.SECOND))
