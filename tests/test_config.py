"""Loading a configuration: every mistake at once, each with its place and what to write instead."""

from __future__ import annotations

import json
import os
import random
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any, get_args

import pytest
import yaml
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pem import make, needs_openssl

from monitor.configuration.config import Config, ConfigurationError, load, load_measured
from monitor.configuration.problems import Problem
from monitor.configuration.sections.base import Section
from monitor.configuration.sections.document import NOT_BUILT_KEYS, NOT_BUILT_VALUES, Document
from monitor.plan import Chart

HERE = Path(__file__).parent.parent / "config"
EXAMPLE = (HERE / "jar-line-2.yaml").read_text()

GOOD = """\
version: 1
broker:
  host: localhost
outputs:
  root: watch/out
journal:
  path: var/j.db
characteristics:
  weight:
    unit: g
    source:
      topic: "plant/{lane}/scale"
      payload: json
      value: /net
      stream: {head: /head}
    subgroup:
      size: 5
    baseline:
      mean: 340
      sigma: 2
    detectors:
      - kind: shewhart
      - kind: cusum
        k: 0.5
        h: 5
  glue:
    source: {topic: plant/glue, payload: number}
    baseline: {mean: 165, sigma: 1.2}
    detectors:
      - {kind: ewma, lambda: 0.2}
"""

Write = Callable[..., Path]


@pytest.fixture
def write(tmp_path: Path) -> Write:
    """Writes a configuration to ``line.yaml`` and gives its path."""

    def make(text: str | bytes) -> Path:
        file = tmp_path / "line.yaml"
        file.write_bytes(text.encode() if isinstance(text, str) else text)
        return file

    return make


def problems(path: Path, **environ: str) -> list[str]:
    """What is wrong, a line each, without the folder."""
    with pytest.raises(ConfigurationError) as caught:
        load(path, environ)
    folder = str(path if path.is_dir() else path.parent)
    return [str(problem).replace(folder + os.sep, "") for problem in caught.value.problems]


def edited(old: str, new: str) -> str:
    assert GOOD.count(old) == 1, f"{old!r} stands {GOOD.count(old)} times"
    return GOOD.replace(old, new)


def document(write: Write, text: str, **environ: str) -> Document:
    return load(write(text), environ).document


def test_a_good_one(write: Write) -> None:
    config = load(write(GOOD), {})
    assert isinstance(config, Config)
    assert config.folder == write(GOOD).parent
    assert list(config.document.characteristics) == ["weight", "glue"]
    assert config.document.characteristics["weight"].source.keys() == ["lane", "head"]


def test_the_example_is_good() -> None:
    assert len(load(HERE / "jar-line-2.yaml", {}).document.characteristics) == 3


# ── one mistake at a time: its line, its key, and a word of what to do ────────────────────────────

MISTAKES = [
    # old, new, line, key, wrong, instead
    ("version: 1\n", "version: 2\n", 1, "version", "2 is no version", "write version: 1"),
    ("version: 1\n", "", 1, "version", "is missing", "write version: 1"),
    ("version: 1", "version: true", 1, "version", "not a whole number", "version: 1"),
    ("host: localhost", "hots: localhost", 3, "broker.hots", "not a known key", "host"),
    ("  host: localhost", "  port: 1", 2, "broker.host", "is missing", "localhost"),
    ("host: localhost", "host: mqtt://x", 3, "broker.host", "more than a name", "port"),
    ("host: localhost", "host: x:1883", 3, "broker.host", "more than a name", "port"),
    ("host: localhost", 'host: ""', 3, "broker.host", "is empty", "localhost"),
    ("host: localhost", "host: 5", 3, "broker.host", "5 is not text", "localhost"),
    ("host: localhost", "host: [x]", 3, "broker.host", "a list is not text", "localhost"),
    ("host: localhost", "host:", 3, "broker.host", "has no value", "leave the key out"),
    ("host: localhost", "host: a\n  port: 0", 4, "broker.port", "0 is below 1", "1883"),
    ("host: localhost", "host: a\n  port: 65536", 4, "broker.port", "above 65535", "1883"),
    ("host: localhost", "host: a\n  port: 1.5", 4, "broker.port", "not a whole number", "1883"),
    ("host: localhost", 'host: a\n  port: "1"', 4, "broker.port", "in quotes", "without"),
    ("host: localhost", "host: a\n  keepalive: 30", 4, "broker.keepalive", "no unit", "30s"),
    ("host: localhost", "host: a\n  keepalive: 1d", 4, "broker.keepalive", "65535s", "30s"),
    ("host: localhost", "host: a\n  keepalive: 1ms", 4, "broker.keepalive", "seconds", "30s"),
    ("host: localhost", "host: a\n  keepalive: soon", 4, "broker.keepalive", "no", "30s"),
    ("host: localhost", "host: a\n  keepalive: [1]", 4, "broker.keepalive", "duration", "30s"),
    ("host: localhost", 'host: a\n  client_id: "a\\tb"', 4, "broker.client_id", "char", "name"),
    ("host: localhost", "host: a\n  protocol: 3.1", 4, "broker.protocol", "3.1 is not", "3.1.1"),
    ("host: localhost", "host: a\n  protocol: 5", 4, "broker.protocol", "5 is not", "in quotes"),
    ("host: localhost", "host: a\n  session_expiry: 7d", 4, "broker.session_expiry", "needs", "5"),
    (
        "host: localhost",
        'host: a\n  protocol: "5"\n  session_expiry: 0s',
        5,
        "broker.session_expiry",
        "'0s' is not a whole number of seconds from 1s up",
        "7d",
    ),
    ("host: localhost", "host: a\n  tls: true", 4, "broker.tls", "not a mapping", "ca.pem"),
    ("host: localhost", "host: a\n  password: x", 4, "broker.password", "known", "password_file"),
    ("root: watch/out", "root: plant/+", 5, "outputs.root", "wildcard", "plain topic"),
    ("root: watch/out", "root: /plant", 5, "outputs.root", "begins or ends with /", "write"),
    ("root: watch/out", "root: plant/", 5, "outputs.root", "begins or ends with /", "write"),
    ("root: watch/out", "root: $SYS/x", 5, "outputs.root", "begins with $", "write"),
    ("root: watch/out", "root: a\n  points: yes", 6, "outputs.points", "'yes' is nei", "true or"),
    ("root: watch/out", "root: a\n  points: 1", 6, "outputs.points", "neither true", "true or"),
    ("path: var/j.db", "path: 7", 7, "journal.path", "7 is not text", "path of a file"),
    ("  weight:\n", "  net weight:\n", 9, "characteristics.net weight", "char", "letters"),
    ("  weight:\n", "  net/weight:\n", 9, "characteristics.net/weight", "char", "letters"),
    ("unit: g", "title: 5", 10, "characteristics.weight.title", "not text", "title"),
    ("unit: g", "title: [a]", 10, "characteristics.weight.title", "not text", "title"),
    ("unit: g", "titel: a", 10, "characteristics.weight.titel", "known key", "did you mean title"),
    ("unit: g", "zzz: a", 10, "characteristics.weight.zzz", "known key", "known here: title, unit"),
    ("unit: g", "subgruop: {}", 10, "characteristics.weight.subgruop", "known", "mean subgroup"),
    (
        "unit: g",
        "specification: {lower: 5, upper: 4}",
        10,
        "characteristics.weight.specification.upper",
        "4 is out of order",
        "in their order",
    ),
    (
        "unit: g",
        "specification: {lower: 5, nominal: 4}",
        10,
        "characteristics.weight.specification.nominal",
        "4 is out of order",
        "in their order",
    ),
    ('"plant/{lane}/scale"', '""', 12, "T", "is empty", "topic filter"),
    ('"plant/{lane}/scale"', '"plant/{lane"', 12, "T", "brace", "topic filter"),
    ('"plant/{lane}/scale"', '"plant/{lane}/{lane}"', 12, "T", "twice", "topic filter"),
    ('"plant/{lane}/scale"', '"a/{lane}/b#"', 12, "T", "has a #", "topic filter"),
    ('"plant/{lane}/scale"', "a/b+", 12, "T", "has a +", "topic filter"),
    ('"plant/{lane}/scale"', "$share/g/a", 12, "T", "shared", "topic filter"),
    ('"plant/{lane}/scale"', '"a/{time}"', 12, "T", "column of every table", "head"),
    ('"plant/{lane}/scale"', "5", 12, "T", "not text", "topic filter"),
    ("payload: json", "payload: xml", 13, "S.payload", "'xml' is not known", "json or number"),
    ("payload: number", "payload: number, value: /x", 27, "GS.value", "needs payload", "leave it"),
    ("payload: number", "payload: number, time: /x", 27, "GS.time", "needs payload", "leave it"),
    ("payload: number", "payload: number, sequence: /x", 27, "GS.sequence", "needs", "leave it"),
    ("payload: number", "payload: number, stream: {a: /x}", 27, "GS.stream", "needs", "leave it"),
    ("payload: number", "payload: number, use_if: {/x: 1}", 27, "GS.use_if", "needs", "leave it"),
    ("      value: /net\n", "", 11, "S.value", "is missing", "/net"),
    ("value: /net", "value: net", 14, "S.value", "'net' is not a JSON Pointer", "/net"),
    ("value: /net", "value: /a~2", 14, "S.value", "JSON Pointer", "/net"),
    ("value: /net", "value: /a\n      time: t", 15, "S.time", "JSON Pointer", "/net"),
    ("value: /net", "value: /a\n      sequence: n", 15, "S.sequence", "JSON Pointer", "/net"),
    (
        "value: /net",
        "value: /a\n      sequence: {wraps: 9}",
        15,
        "S.sequence.value",
        "missing",
        "/n",
    ),
    (
        "value: /net",
        "value: /a\n      sequence: {value: /n, wraps: 1}",
        15,
        "S.sequence.wraps",
        "below 2",
        "65536",
    ),
    ("stream: {head: /head}", "stream: {lane: /l}", 15, "S.stream.lane", "level of the", "one"),
    ("stream: {head: /head}", "stream: {4: /l}", 15, "S.stream.4", "character", "letter"),
    ("stream: {head: /head}", "stream: {value: /l}", 15, "S.stream", "column", "head"),
    ("stream: {head: /head}", "stream: [head]", 15, "S.stream", "not a mapping", "{head: /head}"),
    ("stream: {head: /head}", "use_if: {ok: true}", 15, "S.use_if.ok", "JSON Pointer", "/net"),
    ("stream: {head: /head}", "use_if: {/ok: []}", 15, "S.use_if./ok", "empty", "accept"),
    ("stream: {head: /head}", "use_if: {/ok: [[1]]}", 15, "S.use_if./ok[0]", "text, n", "only"),
    ("stream: {head: /head}", "use_if: {/ok: .nan}", 15, "S.use_if./ok", "not a text", "only"),
    ("stream: {head: /head}", "use_if: accept", 15, "S.use_if", "not a mapping", "verdict"),
    (
        "stream: {head: /head}",
        "plausible: {lower: 2, upper: 2}",
        15,
        "S.plausible.upper",
        "2 is not above lower",
        "in their order",
    ),
    (
        "stream: {head: /head}",
        "plausible: {upper: .inf}",
        15,
        "S.plausible.upper",
        ".inf is not a finite number",
        "largest value",
    ),
    ("stream: {head: /head}", "expected_rate: 600", 15, "S.expected_rate", "600 is not", "/min"),
    ("stream: {head: /head}", "expected_rate: 0/min", 15, "S.expected_rate", "not a", "/min"),
    ("stream: {head: /head}", "expected_rate: 6/week", 15, "S.expected_rate", "not a", "/min"),
    ("stream: {head: /head}", "expected_rate: -6/s", 15, "S.expected_rate", "not a", "/min"),
    ("size: 5", "size: 0", 17, "W.subgroup.size", "0 is below 1", "from 1"),
    ("size: 5", "size: 5.0", 17, "W.subgroup.size", "5.0 is not a whole number", "from 1"),
    ("size: 5", "size: true", 17, "W.subgroup.size", "true is not a whole number", "from 1"),
    ("size: 5", "max_gap: 0s", 17, "W.subgroup.max_gap", "no time at all", "30s"),
    ("size: 5", "max_gap: 30 seconds", 17, "W.subgroup.max_gap", "not a duration", "30s"),
    ("size: 5", "max_gap: -5s", 17, "W.subgroup.max_gap", "not a duration", "30s"),
    ("size: 5", f"max_gap: {'9' * 400}d", 17, "W.subgroup.max_gap", "not a duration", "30s"),
    ("size: 5", "size: 5\n      every: 0s", 18, "W.subgroup.every", "no time at all", "30s"),
    ("size: 5", "min_size: 5", 17, "W.subgroup.min_size", "no window beside it", "window: too"),
    ("size: 5", "window: 0s", 17, "W.subgroup.window", "not from 1ms to 1d", "60s"),
    ("size: 5", "window: 2d", 17, "W.subgroup.window", "not from 1ms to 1d", "60s"),
    ("size: 5", "window: 60", 17, "W.subgroup.window", "60 has no unit", "30s"),
    ("size: 5", "window: 9s\n      min_size: 0", 18, "W.subgroup.min_size", "below 1", "from 1"),
    ("size: 5", "size: 5\n      window: 9s", 17, "W.subgroup.size", "beside window", "or size"),
    ("path: var/j.db", "path: var/j.db\n  keep: 5h", 8, "journal.keep", "less than a day", "30d"),
    ("path: var/j.db", "path: var/j.db\n  max_size: 20", 8, "journal.max_size", "size", "20GB"),
    ("path: var/j.db", "path: var/j.db\n  max_size: 1MB", 8, "journal.max_size", "small", "50MB"),
    ("size: 5", "window: 9s\n      every: 9s", 18, "W.subgroup.every", "beside window", "keep"),
    ("size: 5", "window: 9s\n      max_gap: 9s", 18, "W.subgroup.max_gap", "beside win", "keep"),
    ("size: 5", "max_gap: 99999999d", 17, "W.subgroup.max_gap", "hundred years", "shorter"),
    ("mean: 340", "mean: heavy", 19, "W.baseline.mean", "'heavy' is not a number", "341.2"),
    ("mean: 340", "mean: '340'", 19, "W.baseline.mean", "stands in quotes", "without quotes"),
    ("mean: 340", "mean: .nan", 19, "W.baseline.mean", ".nan is not a finite", "341.2"),
    ("mean: 340", "mean: 1e999", 19, "W.baseline.mean", "1e999 is not a finite", "341.2"),
    ("mean: 340", "mean: true", 19, "W.baseline.mean", "true is not a number", "341.2"),
    ("sigma: 2", "sigma: 0", 20, "W.baseline.sigma", "0 is not above 0", "1.9"),
    ("sigma: 2", "sigma: -1.9", 20, "W.baseline.sigma", "-1.9 is not above 0", "1.9"),
    ("sigma: 2", "sigma: 1e-300", 20, "W.baseline.sigma", "is below 1e-100", "1.9"),
    ("sigma: 2", "sigm: 2", 20, "W.baseline.sigm", "not a known key", "did you mean sigma?"),
    ("mean: 340\n", "\n", 18, "W.baseline.mean", "is missing", "341.2"),
    ("sigma: 2\n", "\n", 18, "W.baseline.sigma", "is missing", "1.9"),
    ("mean: 340\n      sigma: 2", "by_stream: {}", 19, "W.baseline.by_stream", "empty", "head=4"),
    ("mean: 340\n      sigma: 2", "by_stream: 5", 19, "W.baseline.by_stream", "not a map", "head"),
    (
        "mean: 340\n",
        "by_stream: {head=1;lane=1: {mean: 1, sigma: 1}}\n",
        20,
        "W.baseline.sigma",
        "2 has no mean beside it",
        "write mean: too",
    ),
    (
        "mean: 340\n      sigma: 2",
        "by_stream: {head=1: {mean: 1, sigma: 1}}",
        19,
        "W.baseline.by_stream.head=1",
        "is no stream of this characteristic, whose keys are head, lane",
        "head=…;lane=…",
    ),
    ("unit: g", "resolution: 0", 10, "W.resolution", "0 is not above 0", "smallest step"),
    (
        "sigma: 2\n",
        "sigma: 2\n      sigma_between: -1\n",
        21,
        "W.baseline.sigma_between",
        "-1 is below 0",
        "0.4",
    ),
    ("kind: shewhart", "kind: shewart", 22, "D[0].kind", "'shewart' is not known", "shewhart"),
    ("kind: shewhart", "chart: mean", 22, "D[0].kind", "is missing", "kind: shewhart, cusum"),
    ("- kind: shewhart", "- 5", 22, "D[0]", "5 is not a mapping", "kind: shewhart"),
    ("kind: shewhart", "kind: [a]", 22, "D[0].kind", "not known", "kind: shewhart"),
    ("kind: shewhart", "{kind: shewhart, width: 0}", 22, "D[0].width", "0 is not above", "3"),
    ("kind: shewhart", "{kind: shewhart, name: a b}", 22, "D[0].name", "character", "letters"),
    ("kind: shewhart", "{kind: shewhart, direction: u}", 22, "D[0].direction", "'u'", "both, up"),
    (
        "kind: shewhart",
        "{kind: shewhart, chart: maen}",
        22,
        "D[0].chart",
        "'maen'",
        "median, range",
    ),
    (
        "kind: shewhart",
        "{kind: shewhart, chart: individual}",
        22,
        "D[0].chart",
        "'individual' needs subgroups of size 1",
        "write mean, or",
    ),
    (
        "kind: shewhart",
        "{kind: shewhart, chart: moving_range}",
        22,
        "D[0].chart",
        "'moving_range' needs subgroups of size 1",
        "write range, or",
    ),
    (
        "kind: shewhart",
        "{kind: shewhart, chart: range, rules: [{rule: run, length: 8}]}",
        22,
        "D[0].rules",
        "holds run, where a range chart takes the rule outside only",
        "outside-limits",
    ),
    (
        "kind: shewhart",
        "{kind: shewhart, chart: sd, rules: nelson-1984}",
        22,
        "D[0].rules",
        "holds alternation, mixture, run, stratification, trend, zone, where a sd chart takes",
        "outside-limits",
    ),
    ("size: 5", "size: 1", 22, "D[0].chart", "'sd' needs two readings or more", "larger subgroup"),
    ("size: 5", "window: 9s", 22, "D[0].chart", "'sd' needs two readings or more", "min_size: 2"),
    ("kind: shewhart", "{kind: shewhart, rules: nelson}", 22, "D[0].rules", "'nelson' is no", "or"),
    ("kind: shewhart", "{kind: shewhart, rules: []}", 22, "D[0].rules", "is empty", "preset"),
    ("kind: shewhart", "{kind: shewhart, rules: 5}", 22, "D[0].rules", "not a list", "preset"),
    ("kind: shewhart", "{kind: shewhart, k: 5}", 22, "D[0].k", "not a known key", "known here"),
    ("        k: 0.5\n", "        k: -0.5\n", 24, "D[1].k", "-0.5 is below 0", "0.5"),
    ("        k: 0.5\n", "", 23, "D[1].k", "is missing", "0.5"),
    ("h: 5", "h: 0", 25, "D[1].h", "0 is not above 0", "such as 5"),
    ("h: 5", "h: 5\n        head_start: 1", 26, "D[1].head_start", "1 is not below 1", "fraction"),
    ("h: 5", "h: 5\n        head_start: -0.1", 26, "D[1].head_start", "below 0", "fraction"),
    ("h: 5", "h: 5\n        clip: 0.5", 26, "D[1].clip", "is not above k", "larger clip"),
    ("h: 5", "h: 5\n        after_signal: stop", 26, "D[1].after_signal", "'stop'", "restart or"),
    ("h: 5", "h: 5\n        chart: range", 26, "D[1].chart", "'range' is not known", "variance"),
    ("h: 5", "h: 5\n        chart: median", 26, "D[1].chart", "'median' is not known", "variance"),
    ("kind: shewhart", "{kind: cusum, k: 1, h: 4}", 23, "D[1]", "line 22 (cusum)", "name:"),
    ("lambda: 0.2", "lambda: 0", 30, "G[0].lambda", "0 is not above 0", "0.2"),
    ("lambda: 0.2", "lambda: 1.01", 30, "G[0].lambda", "1.01 is above 1", "0.2"),
    ("lambda: 0.2", "lam: 0.2", 30, "G[0].lam", "not a known key", "did you mean lambda?"),
    ("lambda: 0.2", "lambda: 0.2, limits: wide", 30, "G[0].limits", "'wide'", "exact or"),
    ("lambda: 0.2", "lambda: 2, clip: 0.1", 30, "G[0].lambda", "2 is above 1", "0.2"),
    ("lambda: 0.2", "lambda: 0.2, clip: 0.9", 30, "G[0].clip", "could never reach", "larger"),
    (
        "{kind: ewma, lambda: 0.2}",
        "{kind: shewhart, chart: range}",
        30,
        "G[0].chart",
        "'range' needs two readings or more",
        "moving_range",
    ),
    ("unit: g", "priority: urgent", 10, "W.priority", "'urgent' is not known", "low, medium or"),
    ("unit: g", "priority: {up: 1}", 10, "W.priority.up", "1 is not known", "low, medium or"),
    ("unit: g", "priority: {rise: low}", 10, "W.priority.rise", "not a known key", "up, down"),
    ("unit: g", "reaction: call", 10, "W.reaction", "'call' is not a list", "list of texts"),
    ("unit: g", "reaction: [5]", 10, "W.reaction[0]", "5 is not text", "list of texts"),
    ("unit: g", "reaction: ['a', 'b {heed}']", 10, "W.reaction[1]", "{heed}", "{lane} or {head}"),
    ("unit: g", "reaction: {up: ['{head!r}']}", 10, "W.reaction.up[0]", "{head!r}", "{lane}"),
    ("unit: g", "reaction: {up: ['{head']}", 10, "W.reaction.up[0]", "partner", "{lane}"),
    (
        "topic: plant/glue",
        'topic: "plant/+/+"',
        27,
        "characteristics.glue.source.topic",
        "'plant/+/+' matches topics that 'plant/{lane}/scale' in line.yaml:12 matches too",
        "the same filter in both",
    ),
    (
        "topic: plant/glue",
        'topic: "watch/out/#"',
        27,
        "characteristics.glue.source.topic",
        "we publish under outputs.root",
        "narrower filter",
    ),
]


def full(key: str) -> str:
    return {"T": "characteristics.weight.source.topic"}.get(key) or re.sub(
        "^([SWDG]|GS)(?=[.\\[])",
        lambda found: {
            "S": "characteristics.weight.source",
            "W": "characteristics.weight",
            "D": "characteristics.weight.detectors",
            "G": "characteristics.glue.detectors",
            "GS": "characteristics.glue.source",
        }[found[1]],
        key,
    )


@pytest.mark.parametrize(("old", "new", "line", "key", "wrong", "instead"), MISTAKES)
def test_a_mistake(
    write: Write, old: str, new: str, line: int, key: str, wrong: str, instead: str
) -> None:
    text = edited(old, new)
    if "'sd' needs" in wrong:
        text = text.replace("kind: shewhart", "{kind: shewhart, chart: sd}", 1)
    found = problems(write(text))
    assert len(found) == 1, found
    start = f"line.yaml:{line}: {full(key)}: "
    assert found[0].startswith(start)
    said, _, to_do = found[0].removeprefix(start).partition("; ")
    assert wrong in said
    assert instead in to_do


def test_all_mistakes_at_once(write: Write) -> None:
    """Sorted by line, across sections, with what spans sections among them."""
    text = GOOD
    for old, new in [
        ("host: localhost", "hots: localhost"),
        ("root: watch/out", "root: plant/x"),
        ("unit: g", "unit: 5\n    reaction: ['{hed}']"),
        ("stream: {head: /head}", "stream: {head: head}"),
        ("sigma: 2\n", "sigma: -2\n"),
        ("kind: shewhart", "{kind: shewhart, chart: individual}"),
        ("h: 5", "h: none\n      - {kind: cusum, k: 1, h: ${H}}"),
        ("topic: plant/glue", 'topic: "plant/x/#"'),
        ("sigma: 1.2}", "sigma: 1.2, sigma: 1.3, learn: 14d}"),
    ]:
        assert text.count(old) == 1
        text = text.replace(old, new)
    text = text.replace("${H}", '"${H}"')
    found = [tuple(problem.split(": ")[:2]) for problem in problems(write(text))]
    assert found == [
        ("line.yaml:3", "broker.hots"),
        ("line.yaml:10", "characteristics.weight.unit"),
        ("line.yaml:16", "characteristics.weight.source.stream.head"),
        ("line.yaml:21", "characteristics.weight.baseline.sigma"),
        ("line.yaml:23", "characteristics.weight.detectors[0].chart"),
        ("line.yaml:26", "characteristics.weight.detectors[1].h"),
        ("line.yaml:27", "characteristics.weight.detectors[2]"),
        ("line.yaml:27", "characteristics.weight.detectors[2].h"),
        ("line.yaml:29", "characteristics.glue.source.topic"),
        ("line.yaml:29", "characteristics.glue.source.topic"),
        ("line.yaml:30", "characteristics.glue.baseline.learn"),
        ("line.yaml:30", "characteristics.glue.baseline.sigma"),
    ]


def test_rules_each_on_their_own(write: Write) -> None:
    rules = """kind: shewhart
        rules:
          - {rule: zon}
          - {length: 8}
          - zone
          - {rule: zone, count: 3, of: 2, width: 2}
          - {rule: run, length: 1}
          - {rule: trend, length: 2}
          - {rule: alternation, length: 2}
          - {rule: mixture, length: 8, width: -1}
          - {rule: run, length: 8, width: 2}
          - 5
          - {rule: outside, width: 2.5}"""
    at = "characteristics.weight.detectors[0].rules"
    wanted = [
        (24, "[0].rule", "'zon' is not known here"),
        (25, "[1].rule", "is missing"),
        (26, "[2].count", "is missing"),
        (26, "[2].of", "is missing"),
        (26, "[2].width", "is missing"),
        (27, "[3].of", "2 is less than count"),
        (28, "[4].length", "1 is below 2"),
        (29, "[5].length", "2 is below 3"),
        (30, "[6].length", "2 is below 3"),
        (31, "[7].width", "-1 is not above 0"),
        (32, "[8].width", "is not a known key"),
        (33, "[9]", "5 is not a mapping"),
    ]
    found = problems(write(edited("kind: shewhart", rules)))
    assert [problem.split("; ")[0] for problem in found] == [
        f"line.yaml:{line}: {at}{key}: {wrong}" for line, key, wrong in wanted
    ]


def test_a_misspelt_key_is_not_missing_too(write: Write) -> None:
    assert len(problems(write(GOOD.replace("source:", "sorce:")))) == 2


# ── not built yet ────────────────────────────────────────────────────────────────────────────────

NOT_BUILT = [
    # every example of the contract that is still to come
    ("version: 1", "version: 1\ninstances: [a, b]", "instances"),
    ("unit: g", "gauge: {silent: 5min}", "characteristics.weight.gauge"),
    ("unit: g", "changeover: {topic: x}", "characteristics.weight.changeover"),
    *(
        (
            "kind: shewhart",
            f"{{kind: shewhart, chart: {chart}}}",
            "characteristics.weight.detectors[0].chart",
        )
        for chart in ("fraction", "number", "count", "rate")
    ),
]


@pytest.mark.parametrize(("old", "new", "key"), NOT_BUILT)
def test_not_built_yet(write: Write, old: str, new: str, key: str) -> None:
    (found,) = problems(write(edited(old, new)))
    assert f": {key}: " in found
    assert "not built yet" in found


def test_nothing_is_both_built_and_not() -> None:
    for section, keys in NOT_BUILT_KEYS.items():
        sections = [section, *section.__subclasses__()]
        assert not keys & {key for each in sections for key in fields(each)}
    assert list(NOT_BUILT_VALUES) == ["chart"]
    assert not NOT_BUILT_VALUES["chart"] & set(get_args(Chart))


def fields(section: type[Section]) -> set[str]:
    return {field.alias or name for name, field in section.model_fields.items()}


# ── several files ────────────────────────────────────────────────────────────────────────────────


def split(folder: Path, text: str) -> None:
    """The daemon's keys in one file, a characteristic in each of two others."""
    daemon, weight = text.split("characteristics:\n")
    weight, glue = weight.split("  glue:\n")
    (folder / "a-daemon.yaml").write_text(daemon)
    (folder / "b-weight.yaml").write_text("characteristics:\n" + weight)
    (folder / "c-glue.yaml").write_text("characteristics:\n  glue:\n" + glue)


def test_a_folder_is_one_configuration(tmp_path: Path, write: Write) -> None:
    whole = load(write(GOOD), {}).document
    write(GOOD).unlink()
    split(tmp_path, GOOD)
    (tmp_path / "empty.yaml").write_text("# nothing\n")
    (tmp_path / ".hidden.yaml").write_text("version: 9\n")
    (tmp_path / "notes.txt").write_text("version: 9\n")
    config = load(tmp_path, {})
    assert config.document == whole
    assert config.folder == tmp_path


def test_mistakes_in_a_folder_name_their_file(tmp_path: Path) -> None:
    split(tmp_path, GOOD.replace("sigma: 2\n", "sigma: -2\n").replace("lambda: 0.2", "lambda: 2"))
    assert [problem.split(": ")[0] for problem in problems(tmp_path)] == [
        "b-weight.yaml:13",
        "c-glue.yaml:6",
    ]


def test_one_value_in_two_files(tmp_path: Path) -> None:
    split(tmp_path, GOOD)
    (tmp_path / "d.yaml").write_text("version: 1\nbroker:\n  port: 1\n  host: other\n")
    assert problems(tmp_path) == [
        "d.yaml:1: version: also stands in a-daemon.yaml:1; keep one of the two",
        "d.yaml:4: broker.host: also stands in a-daemon.yaml:3; keep one of the two",
    ]


def test_one_unreadable_file_does_not_make_the_others_wrong(tmp_path: Path) -> None:
    split(tmp_path, GOOD.replace("h: 5", "h: 0"))
    (tmp_path / "a-daemon.yaml").write_text("version: [\n")
    found = problems(tmp_path)
    assert len(found) == 2
    assert found[0].startswith("a-daemon.yaml:1: this is not YAML")
    assert found[1].startswith("b-weight.yaml:18: characteristics.weight.detectors[1].h: 0 ")


def test_a_yml_file_is_not_passed_over_in_silence(tmp_path: Path) -> None:
    split(tmp_path, GOOD)
    (tmp_path / "d.yml").write_text("x: 1\n")
    (found,) = problems(tmp_path)
    assert found == "d.yml: is not read, because its name does not end in .yaml; rename it"


def test_nothing_to_read(tmp_path: Path, write: Write) -> None:
    assert problems(tmp_path / "no.yaml") == [
        "no.yaml: cannot be read (No such file or directory); "
        "give the path of a readable file or folder"
    ]
    with pytest.raises(ConfigurationError, match="holds no"):
        load(tmp_path, {})
    assert problems(write("# later\n")) == ["line.yaml: is empty; begin with version: 1"]
    assert problems(write("- 1\n")) == [
        "line.yaml:1: a configuration is a mapping of keys; begin with version: 1"
    ]


# ── variables and secrets ────────────────────────────────────────────────────────────────────────


def test_variables_fill_in_any_value(write: Write) -> None:
    text = edited("host: localhost", "host: ${HOST}\n  port: ${PORT}\n  keepalive: ${KEEP}")
    text = text.replace("root: watch/out", 'root: "watch/${LINE}/out"\n  points: ${POINTS}')
    text = text.replace("mean: 340", 'mean: "${MEAN}"').replace("unit: g", "unit: ${UNIT}")
    environ = {"HOST": "b1", "PORT": "1884", "KEEP": "1min", "LINE": "7", "POINTS": "false"}
    found = document(write, text, MEAN="340.5", UNIT="1", **environ)
    assert (found.broker.host, found.broker.port) == ("b1", 1884)
    assert found.broker.keepalive == 60_000_000
    assert (found.outputs.root, found.outputs.points) == ("watch/7/out", False)
    assert found.characteristics["weight"].baseline.mean == 340.5
    assert found.characteristics["weight"].unit == "1"


def test_a_variable_that_is_not_set(write: Write) -> None:
    text = edited("host: localhost", "host: ${HOST}\n  port: ${PORT}")
    assert problems(write(text), HOST="x") == [
        "line.yaml:4: broker.port: the environment variable PORT is not set; "
        "set it, or write the value here"
    ]


SECRET = "hunter2"


@pytest.mark.parametrize("value", ["X", "/X", "{ X }", "a/+X/#", "X\n", "X:1", "5X", "\ud800X"])
def test_what_a_variable_holds_is_never_shown(write: Write, value: str) -> None:
    """Every value of the example through a variable, one after the other."""
    whole = yaml.safe_load(EXAMPLE)
    whole["broker"] |= {"username": "m", "password_file": "line.yaml"}
    environ = {"LEAK": value.replace("X", SECRET)}
    said = ""
    for section, key in leaves(whole):
        kept, section[key] = section[key], "${LEAK}"
        try:
            load(write(json.dumps(whole)), environ)
        except ConfigurationError as error:
            said += f"{error} {error.problems!r}"
        section[key] = kept
    assert said.count("the configuration has") > 30
    assert SECRET not in said


def leaves(section: Any) -> list[tuple[Any, Any]]:
    """Every (mapping or list, key) of a document that holds a scalar."""
    found: list[tuple[Any, Any]] = []
    for key in section if isinstance(section, dict) else range(len(section)):
        inner = section[key]
        found += leaves(inner) if isinstance(inner, dict | list) else [(section, key)]
    return found


def test_a_secret_in_a_topic_or_a_name(write: Write) -> None:
    text = GOOD.replace('"plant/{lane}/scale"', '"${X}/+"').replace("plant/glue", '"${X}/#"')
    text = text.replace("kind: shewhart", 'kind: shewhart\n        name: "${X}"')
    text = text.replace("kind: cusum", 'kind: cusum\n        name: "${X}"')
    found = "\n".join(problems(write(text), X=SECRET))
    assert "same name" in found
    assert "matches topics" in found
    assert SECRET not in found


def with_password(write: Write, content: bytes | None) -> Path:
    path = write(edited("host: localhost", "host: b\n  username: m\n  password_file: sub/pw"))
    if content is not None:
        (path.parent / "sub").mkdir(exist_ok=True)
        (path.parent / "sub" / "pw").write_bytes(content)
    return path


@pytest.mark.parametrize("end", [b"", b"\n", b"\r\n"])
def test_a_password_comes_from_a_file_beside(write: Write, end: bytes) -> None:
    config = load(with_password(write, SECRET.encode() + b" x " + end), {})
    assert config.password == SECRET + " x "
    assert SECRET not in repr(config)


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (None, "cannot be read (No such file"),
        (b"", "is empty"),
        (b"\n", "is empty"),
        (b"\xff" + SECRET.encode(), "not a file of UTF-8"),
        (b"x" * 70_000, "too long"),
    ],
)
def test_a_password_file_that_will_not_do(write: Write, content: bytes | None, says: str) -> None:
    (found,) = problems(with_password(write, content))
    assert found.startswith("line.yaml:5: broker.password_file: the file ")
    assert says in found
    assert SECRET not in found


def test_a_replay_needs_nothing_of_the_daemon(write: Write) -> None:
    """Neither the keys, nor the variables and the files in them, nor that they are right."""
    path = with_password(write, None)
    text = path.read_text().replace("host: b", "host: ${BROKER}\n  prot: 1")
    replayed = load_measured(write(text), {})
    assert replayed == load_measured(write(GOOD), {})
    alone = "version: 1\n" + GOOD[GOOD.index("characteristics:") :]
    assert load_measured(write(alone), {}) == replayed
    assert list(replayed.characteristics) == ["weight", "glue"]


def test_keys_that_stand_instead_of_those_written(write: Write) -> None:
    """A fragment's keys, new ones too; the others stay, and what is wrong is said as ever."""
    keys = {"baseline": {"mean": 3.5, "sigma": 0.25}, "resolution": 0.5}
    before = load_measured(write(GOOD), {}).characteristics
    after = load_measured(write(GOOD), {}, instead={"weight": keys}).characteristics
    common = after["weight"].baseline.given.common
    assert common is not None
    assert (common.mean, common.sigma) == (3.5, 0.25)
    assert (before["weight"].resolution, after["weight"].resolution) == (None, 0.5)
    assert after["weight"].detectors == before["weight"].detectors
    assert after["glue"] == before["glue"]
    with pytest.raises(ConfigurationError, match="sigma"):
        load_measured(write(GOOD), {}, instead={"weight": {"baseline": {"mean": 1, "sigma": -1}}})


def test_the_daemon_needs_what_a_replay_does_not(write: Write) -> None:
    alone = "version: 1\n" + GOOD[GOOD.index("characteristics:") :]
    assert [problem.split(";")[0] for problem in problems(write(alone))] == [
        "line.yaml:1: broker: is missing",
        "line.yaml:1: journal: is missing",
        "line.yaml:1: outputs: is missing",
    ]


def test_a_replay_finds_the_other_mistakes(write: Write) -> None:
    with pytest.raises(ConfigurationError) as caught:
        load_measured(write(edited("sigma: 2", "sigma: -2").replace("host: local", "hots: l")), {})
    (problem,) = caught.value.problems
    assert problem.key == "characteristics.weight.baseline.sigma"


def test_a_password_written_where_its_file_should_be(write: Write) -> None:
    for line in (f"password_file: {SECRET}", f"password: {SECRET}"):
        found = "\n".join(problems(write(edited("host: localhost", f"host: b\n  {line}"))))
        assert "password_file" in found
        assert SECRET not in found


# ── what no text may do ──────────────────────────────────────────────────────────────────────────


def test_a_flood_of_aliases_ends_soon(write: Write) -> None:
    laughs = "a0: &a0 [x]\n" + "".join(
        f"a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 9)}]\n" for i in range(1, 30)
    )
    assert "aliases" in problems(write(laughs))[0]


def test_aliases_may_repeat_a_list_of_detectors(write: Write) -> None:
    text = edited(
        "    detectors:\n      - kind: shewhart\n",
        "    detectors: &usual\n      - kind: shewhart\n",
    )
    text = text.replace("detectors:\n      - {kind: ewma, lambda: 0.2}", "detectors: *usual")
    found = document(write, text).characteristics
    assert found["glue"].detectors == found["weight"].detectors


WORDS = sorted(set(re.findall(r"[^\s:{}\[\],]+", EXAMPLE)))


@st.composite
def mutations(draw: st.DrawFn) -> str:
    """A good text with a few of its pieces moved, doubled, cut, or replaced by something odd."""
    pieces = re.split(r"(\s+|[:{}\[\],])", draw(st.sampled_from([GOOD, EXAMPLE])))
    odd = st.sampled_from(
        [*WORDS, "", "[]", "{}", "null", "1e999", "-1", "&a x", "*a", "!!t", "${X}"]
    )
    for _ in range(draw(st.integers(1, 6))):
        at = draw(st.integers(0, len(pieces) - 1))
        what = draw(st.integers(0, 3))
        if what == 0:
            del pieces[at]
        elif what == 1:
            pieces.insert(at, draw(odd | st.text(max_size=5)))
        elif what == 2:
            pieces[at] = draw(odd | st.text(max_size=5))
        else:
            other = draw(st.integers(0, len(pieces) - 1))
            pieces[at], pieces[other] = pieces[other], pieces[at]
        if not pieces:
            return ""
    return "".join(pieces)


@settings(
    max_examples=250, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(mutations())
def test_no_mutation_raises_anything_else(write: Write, text: str) -> None:
    path = write(text.encode(errors="surrogatepass"))
    found: tuple[Problem, ...] = ()
    try:
        assert load(path, {"X": "5"}).document.characteristics
    except ConfigurationError as error:
        found = error.problems
    for problem in found:
        assert problem.file == str(path)
        assert problem.line is None or 1 <= problem.line <= text.count("\n") + 1
        assert problem.wrong
        assert problem.instead
        assert "pydantic" not in str(problem)


JUNK: list[Any] = [None, True, -1, 0, 1e999, 2**70, "", "x", "/x", "5min", [], {}, [{}], {"x": 1}]


def test_no_value_anywhere_raises_anything_else(write: Write) -> None:
    """Every value of the example, scalar or not, replaced by every kind of junk."""
    whole = yaml.safe_load(EXAMPLE)
    sections: list[Any] = [whole]
    for section in sections:  # grows as it goes
        sections += [inner for inner in children(section) if isinstance(inner, dict | list)]
    refused = 0
    for section in sections:
        for key in list(section) if isinstance(section, dict) else range(len(section)):
            kept = section[key]
            for junk in random.Random(0).sample(JUNK, 3):
                section[key] = junk
                try:
                    load(write(json.dumps(whole)), {})
                except ConfigurationError:
                    refused += 1
            section[key] = kept
    assert refused > 150


def children(section: Any) -> list[Any]:
    return list(section.values() if isinstance(section, dict) else section)


# ── the readme beside the example ────────────────────────────────────────────────────────────────

README = (HERE / "README.md").read_text()
BLOCKS = re.findall(r"```yaml\n(.*?)```", README, re.DOTALL)


def belongs(block: str) -> Any:
    """An example that needs certificates is left out where none can be made."""
    return pytest.param(block, marks=needs_openssl if "tls:" in block else ())


@pytest.mark.parametrize("block", [belongs(block) for block in BLOCKS])
def test_every_example_of_the_readme_loads(tmp_path: Path, block: str) -> None:
    """Each in place of what it is an example of; names of files in them are those of this test."""
    shown = yaml.safe_load(block)
    whole = yaml.safe_load(GOOD)
    weight = whole["characteristics"]["weight"]
    if "characteristic" in shown:
        whole["characteristics"] = {"net-weight": weight}
        (tmp_path / "b.yaml").write_text(block)
        weight["baseline"] = {"file": "b.yaml"}
    elif set(shown) <= fields(Document):
        whole |= shown
    else:
        weight |= shown
    prepare(tmp_path, tls="tls:" in block, file="baselines/" in block)
    path = tmp_path / "line.yaml"
    path.write_text(yaml.safe_dump(whole, allow_unicode=True))
    assert load(path, {}).document.version == 1


def prepare(folder: Path, *, tls: bool, file: bool) -> None:
    """The files that the readme's examples name."""
    (folder / "password").write_text("x")
    if tls:
        make(folder)
        (folder / "ca.pem").rename(folder / "monitor.pem")
        (folder / "ca.key").rename(folder / "monitor.key")
        (folder / "both.pem").rename(folder / "ca.pem")
    if file:
        (folder / "baselines").mkdir()
        (baseline,) = (block for block in BLOCKS if "origin:" in block)
        text = baseline.replace("characteristic: net-weight", "characteristic: weight")
        (folder / "baselines" / "net-weight.yaml").write_text(text)


def test_the_readme_shows_every_key() -> None:
    sections: list[type[Section]] = list(Section.__subclasses__())
    for section in sections:
        sections += section.__subclasses__()
    prose = re.sub(r"```.*?```", "", README, flags=re.DOTALL)
    shown = set(re.findall(r"[a-z_0-9]+", " ".join([*BLOCKS, *re.findall(r"`([^`]+)`", prose)])))
    assert {key for section in sections for key in fields(section)} <= shown
