"""The documents against the standards they follow, and against what the daemon really publishes."""

from __future__ import annotations

import copy
import json
import re
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any, NamedTuple

import pytest
from brokers import Client, Daemon, Embedded, Received, is_online
from jsonschema import Draft7Validator, Draft202012Validator
from plans import fresh, rules, shewhart, steps

from monitor import describe, messages, times
from monitor.configuration.presets import preset
from monitor.gauge import RULES as GAUGE_RULES
from monitor.plan import CusumPlan, EwmaPlan

pytestmark = pytest.mark.xdist_group("describe")  # one run of the daemon serves them all

ROOT = "plant/jar-line-2/monitor"
LANE = "plant/jar-line-2/checkweigher/lane 1/reading"
TORQUE = "plant/jar-line-2/capper/torque"
START = 1_772_433_672 * times.SECOND  # 2026-03-02T06:41:12Z
SPACING = 10  # seconds

CONFIGURATION: dict[str, object] = {
    "version": 1,
    "outputs": {"root": ROOT},
    "journal": {"path": "jar-line-2.db"},
    "characteristics": {
        "net-weight": {
            "title": "Net weight, 340 g jar",
            "unit": "g",
            "specification": {"nominal": 340, "lower": 331},
            "source": {
                "topic": "plant/jar-line-2/checkweigher/{lane}/reading",
                "payload": "json",
                "value": "/net",
                "time": "/t",
                "sequence": "/n",
                "stream": {"head": "/head"},
                "use_if": {"/verdict": ["accept", "reject"]},
                "plausible": {"lower": 0, "upper": 1000},
            },
            "subgroup": {"size": 2, "max_gap": "30s"},
            "baseline": {
                "mean": 341.2,
                "sigma": 1.9,
                "sigma_between": 0.4,
                "learn": 25,
                "over_at_least": "1min",
            },
            "detectors": [
                {"kind": "shewhart", "chart": "mean", "width": 4.5},
                {"kind": "cusum", "k": 0.5, "h": 8},
                {"kind": "shewhart", "chart": "range", "width": 5},
                {"kind": "shewhart", "chart": "variance", "width": 5},
                {"kind": "cusum", "chart": "variance", "k": 1.5, "h": 30},
            ],
            "priority": {"down": "high", "up": "medium"},
            "reaction": {"up": ["Check fill head {head} for drips or a slow valve."]},
        },
        "cap-torque": {
            "title": "Capping torque",
            "source": {"topic": TORQUE, "payload": "number"},
            "baseline": {"mean": 2.05, "sigma": 0.11, "learn": 25, "over_at_least": "0s"},
            "detectors": [
                {"kind": "ewma", "lambda": 0.2, "width": 2.962},
                {"kind": "shewhart", "chart": "moving_range", "width": 3},
            ],
        },
    },
}

RETAINED = ("standing", "baseline", "health")
EVENTS = {"raised", "updated", "rejoined", "returned-to-normal", "withdrawn"}


def reading(number: int, index: int, net: float, /, **changed: object) -> tuple[str, str]:
    """A checkweigher's message; a field changed to None is left out."""
    fields = {
        "t": times.format_time(START + index * SPACING * times.SECOND),
        "n": number,
        "head": 4,
        "net": net,
        "verdict": "accept",
        **changed,
    }
    return LANE, json.dumps({key: value for key, value in fields.items() if value is not None})


def story() -> list[tuple[str, str]]:
    """A rise, its end, the rise again, then a gauge that restarts."""
    levels = [341.2] * 10 + [349.2] * 6 + [341.2] * 80 + [349.2] * 6
    told = [reading(i + 1, i, level + (-1) ** i) for i, level in enumerate(levels)]
    return [*told, reading(1, len(levels), 341.2)]


UNUSED = {
    "oversized": (LANE, " " * (256 * 1024 + 1)),
    "not-json": (LANE, "{"),
    "not-used": reading(2, 110, 341.2, verdict="calibration"),
    "no-stream": reading(3, 110, 341.2, head=None),
    "no-value": reading(4, 110, 341.2, net=None),
    "not-a-number": reading(5, 110, 341.2, net="heavy"),
    "not-finite": (LANE, reading(6, 110, 12345.0)[1].replace("12345.0", "1e999")),
    "implausible": reading(7, 110, 2000.0),
    "no-time": reading(8, 110, 341.2, t=None),
    "bad-time": reading(9, 110, 341.2, t="2026-03-02T06:41:12"),
    "future": reading(10, 110, 341.2, t="2999-01-01T00:00:00Z"),
    "repeated": story()[-1],
    "late": reading(11, 5, 341.2),
}


class Wire(NamedTuple):
    """What the daemon said, in order, and what the broker had kept of it at the end."""

    said: list[Received]
    kept: list[Received]

    def of(self, kind: str) -> list[dict[str, Any]]:
        """The payloads of a kind."""
        return [m.body for m in self.said if m.topic.split("/")[3] == kind]


@pytest.fixture(scope="module")
def wire(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Wire]:
    """One life of the daemon: everything it can say, its sudden end, and an orderly one."""
    folder = tmp_path_factory.mktemp("wire")
    broker = Embedded(folder)
    broker.start()
    daemon = Daemon(folder, broker.port, CONFIGURATION)
    try:
        with Client(broker.port) as client:
            client.publish(*reading(1, 0, 341.2), retain=True)
            client.subscribe(f"{ROOT}/#")
            daemon.start()
            client.publish_all(story())
            client.publish_all([(TORQUE, "2.05")] * 3 + [(TORQUE, "3.05")] * 3)
            client.publish_all([(TORQUE, f"{2 + each / 100}") for each in range(20)])
            client.publish_all(UNUSED.values())
            client.wait_for(
                lambda ms: {m.body["event"] for m in ms} == EVENTS, f"{ROOT}/alert/net-weight/#"
            )
            client.wait_for(bool, f"{ROOT}/alert/cap-torque")
            client.wait_for(
                lambda ms: {m.body["reason"] for m in ms} == {"retained", *UNUSED},
                f"{ROOT}/setaside",
            )
            for kind in ("standing", "baseline"):
                client.wait_for(lambda ms: len({m.topic for m in ms}) == 2, f"{ROOT}/{kind}/#")
            for end in (daemon.kill, daemon.stop):
                if daemon.process is None:
                    daemon.start()
                before = len(client.received(f"{ROOT}/health"))
                end()
                client.wait_for(
                    lambda ms, before=before: any(is_online(m, online=False) for m in ms[before:]),
                    f"{ROOT}/health",
                )
            said = client.received()
        topics = {m.topic for m in said if m.topic.split("/")[3] in RETAINED}
        with Client(broker.port) as late:
            late.subscribe(f"{ROOT}/#")
            kept = late.wait_for(lambda ms: {m.topic for m in ms} >= topics)
        yield Wire(said, list(kept))
    finally:
        if daemon.process is not None:
            daemon.kill()
        broker.stop()


SCHEMAS = describe.json_schemas()
VALIDATORS = {kind: Draft202012Validator(schema) for kind, schema in SCHEMAS.items()}


# ── JSON Schema ──────────────────────────────────────────────────────────────────────────────────


def test_there_is_a_schema_for_every_kind_of_message() -> None:
    assert list(SCHEMAS) == ["alert", "standing", "baseline", "point", "health", "setaside"]


@pytest.mark.parametrize("kind", SCHEMAS)
def test_a_schema_is_a_complete_2020_12_document(kind: str) -> None:
    schema = SCHEMAS[kind]
    Draft202012Validator.check_schema(schema)
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert schema["$id"] == f"urn:driftbell:schema:1:{kind}"
    for reference in references(schema):
        assert resolved(schema, reference)


@pytest.mark.parametrize("kind", SCHEMAS)
def test_everything_is_explained_in_a_line_a_paragraph(kind: str) -> None:
    for words in described(SCHEMAS[kind]):
        assert words
        assert not re.search(r"[^\n]\n[^\n]|``|\s$", words), words


def described(schema: dict[str, Any]) -> Iterator[str]:
    """The words for each object and each of its properties; those of what a property refers to
    stand for its own."""
    for form in (schema, *schema.get("$defs", {}).values()):
        yield form.get("description", "")
        for field in form["properties"].values():
            referred = [resolved(schema, each) for each in references(field)]
            yield field.get("description") or referred[0].get("description", "")


def references(value: object) -> list[str]:
    """All that ``$ref`` says, however deep."""
    if isinstance(value, dict):
        own = [value["$ref"]] if isinstance(value.get("$ref"), str) else []
        return own + [r for each in value.values() for r in references(each)]
    return [r for each in value for r in references(each)] if isinstance(value, list) else []


def resolved(document: Any, reference: str) -> Any:
    """What a local JSON Pointer leads to; KeyError where nowhere."""
    start, *steps = reference.split("/")
    assert start == "#"
    for step in steps:
        document = document[step]
    return document


def test_what_the_daemon_publishes_is_valid(wire: Wire) -> None:
    for message in wire.said:
        VALIDATORS[message.topic.split("/")[3]].validate(message.body)


def test_the_run_has_seen_every_kind_of_thing(wire: Wire) -> None:
    health, alerts = wire.of("health"), wire.of("alert")
    assert any(each["counts"] is None for each in health), "no will"
    assert any(each["counts"] and not each["online"] for each in health), "no farewell"
    assert {each["direction"] for each in alerts} == {"up", None}
    assert {each["subgroup"] is None for each in alerts} == {True, False}
    assert any(each["open"] for each in wire.of("standing"))
    reasons = SCHEMAS["setaside"]["properties"]["reason"]["enum"]
    # A broker delivers no topic that was not asked for; a recording may hold one.
    assert {each["reason"] for each in wire.of("setaside")} == {*reasons} - {"no-topic"}
    kinds = SCHEMAS["alert"]["properties"]["event"]["enum"]
    assert {each["event"] for each in alerts} == {*kinds}


def test_only_the_wire_has_published(wire: Wire) -> None:
    for event in wire.of("alert"):
        assert list(event).index("published") == list(event).index("time") + 1
        del event["published"]
        VALIDATORS["alert"].validate(event)


MAPS = {"stream", "set_aside"}  # whose keys are data


def mutants(value: Any, name: str = "") -> Iterator[Any]:
    """Copies of a message with one thing wrong: a field removed, added, or of another type."""
    if isinstance(value, dict):
        for key in value:
            for mutant in mutants(value[key], key):
                yield {**value, key: mutant}
            if name not in MAPS and key != "published":
                yield {k: v for k, v in value.items() if k != key}
        yield {**value, "surplus": None}
    elif isinstance(value, list):
        for index, each in enumerate(value):
            for mutant in mutants(each):
                yield [*value[:index], mutant, *value[index + 1 :]]
    yield [[]]  # no field is a list of lists


@pytest.mark.parametrize("kind", SCHEMAS)
def test_what_the_daemon_would_never_publish_is_not_valid(wire: Wire, kind: str) -> None:
    validator = VALIDATORS[kind]
    fullest = sorted(wire.of(kind), key=lambda body: len(json.dumps(body)))[-3:]
    for body in fullest:
        for mutant in mutants(body):
            assert not validator.is_valid(mutant), mutant


@pytest.mark.parametrize(
    ("kind", "path", "wrong"),
    [
        ("alert", ("schema",), 2),
        ("alert", ("id",), "b2c8"),
        ("alert", ("sequence",), 0),
        ("alert", ("event",), "over"),
        ("alert", ("direction",), "both"),
        ("alert", ("priority",), "urgent"),
        ("alert", ("chart",), "cusum"),
        ("alert", ("rule",), "rule-1"),
        ("alert", ("time",), "2026-03-02T06:41:12Z"),
        ("alert", ("time",), "2026-03-02T06:41:12.300+01:00"),
        ("alert", ("published",), None),
        ("alert", ("stream", "head"), 4),
        ("alert", ("stream", "head"), ""),
        ("alert", ("reason",), "bored"),
        ("alert", ("signals", 0, "count"), 0),
        ("alert", ("shift", "onset"), None),
        ("point", ("number",), 1.5),
        ("point", ("range",), -0.1),
        ("point", ("rows", 0, "statistic"), "average"),
        ("standing", ("judging", "judging"), "yes"),
        ("health", ("counts", "set_aside", "late"), -1),
        ("health", ("counts", "set_aside", "lost"), 1),
        ("setaside", ("reason",), "lost"),
        ("setaside", ("example", "payload"), "x" * 201),
    ],
)
def test_values_outside_their_set_are_not_valid(
    wire: Wire, kind: str, path: tuple[str | int, ...], wrong: object
) -> None:
    fullest = max(wire.of(kind), key=lambda body: len(json.dumps(body)))
    VALIDATORS[kind].validate(fullest)
    body = copy.deepcopy(fullest)
    *way, last = path
    holder: Any = body
    for step in way:
        holder = holder[step]
    assert wrong != holder.get(last, object())
    holder[last] = wrong
    (error,) = VALIDATORS[kind].iter_errors(body)
    # The path ends early where one of several forms may hold: a counts object, or null.
    assert tuple(error.absolute_path) == path[: len(error.absolute_path)]


def test_the_rules_are_those_that_detectors_name() -> None:
    level, ramp, saw = [4.0] * 20, [i / 10 for i in range(20)], [0.5, -0.5] * 10
    near, far = [0.1, 0.1, -0.1, -0.1] * 5, [2.0, 2.0, -2.0, -2.0] * 5
    rising = [*near, *level, *ramp, *saw, *far]
    values = rising + [-value for value in rising]
    met: set[str] = set()
    for scheme in (
        shewhart(*preset("nelson-1984", 3.0)),
        CusumPlan("individual", 0.5, 4.0),
        EwmaPlan("individual", 0.2, 3.0),
    ):
        for signals in steps(fresh(scheme), values):
            met |= set(rules(signals))
    assert met | {*GAUGE_RULES} == {*SCHEMAS["alert"]["properties"]["rule"]["enum"]}


def test_who_only_sends_messages_does_without_pydantic() -> None:
    code = "import sys, monitor.messages; sys.exit('pydantic' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


# ── AsyncAPI ─────────────────────────────────────────────────────────────────────────────────────

ASYNCAPI = describe.asyncapi()


@pytest.fixture(scope="module")
def standard() -> Draft7Validator:
    """AsyncAPI 3.0.0's own schema; where it came from is written beside it."""
    path = Path(__file__).parent / "published" / "asyncapi" / "3.0.0.json"
    schema = json.loads(path.read_text("utf-8"))
    Draft7Validator.check_schema(schema)
    return Draft7Validator(schema)


def test_the_asyncapi_document_follows_the_standard(standard: Draft7Validator) -> None:
    standard.validate(ASYNCAPI)
    for reference in references(ASYNCAPI):
        assert resolved(ASYNCAPI, reference)


@pytest.mark.parametrize(
    ("path", "wrong"),
    [
        ("operations/sendAlert/action", "publish"),
        ("operations/sendAlert/bindings/mqtt/qos", 3),
        ("operations/sendHealth/bindings/mqtt/retain", "yes"),
        ("servers/broker/bindings/mqtt/lastWill/qos", 3),
        ("channels/alert/parameters/root", {"schema": {"type": "string"}}),
        ("components/messages/alert/contents", "application/json"),
        ("components/schemas/AlertEvent/required", "id"),
    ],
)
def test_the_standards_schema_tells_right_from_wrong(
    standard: Draft7Validator, path: str, wrong: object
) -> None:
    document = copy.deepcopy(ASYNCAPI)
    *way, last = path.split("/")
    resolved(document, "/".join(["#", *way]))[last] = wrong
    assert not standard.is_valid(document)


def test_a_channels_parameters_are_those_of_its_address() -> None:
    for channel in ASYNCAPI["channels"].values():
        assert re.findall(r"{(\w+)}", channel["address"]) == list(channel["parameters"])


def test_every_topic_is_one_channels_and_every_channel_is_used(wire: Wire) -> None:
    assert {channel_of(message.topic) for message in wire.said} == {*ASYNCAPI["channels"]}


def channel_of(topic: str) -> str:
    """The one channel whose address the topic fits; a stream may have several levels."""
    shapes = {"{root}": re.escape(ROOT), "{characteristic}": "[^/]+", "{stream}": ".+"}
    found = []
    for key, channel in ASYNCAPI["channels"].items():
        address = channel["address"]
        for name, shape in shapes.items():
            address = address.replace(name, shape)
        found += [key] if re.fullmatch(address, topic) else []
    assert len(found) == 1, f"{topic}: {found}"
    return str(found[0])


def test_a_stream_is_in_its_topic_as_its_parameter_says(wire: Wire) -> None:
    (topic,) = {m.topic for m in wire.said if "/alert/net-weight" in m.topic}
    assert topic == f"{ROOT}/alert/net-weight/4/lane%201"
    assert wire.of("alert")[0]["stream"] == {"head": "4", "lane": "lane 1"}


def test_payloads_are_valid_by_the_asyncapi_documents_schemas_too(wire: Wire) -> None:
    components = {"components": ASYNCAPI["components"]}
    validators = {}
    for key, channel in ASYNCAPI["channels"].items():
        ((_, reference),) = channel["messages"].items()
        payload = resolved(ASYNCAPI, reference["$ref"])["payload"]
        validators[key] = Draft7Validator({**payload, **components})
    for schema in components["components"]["schemas"].values():
        Draft7Validator.check_schema(schema)
    for message in wire.said:
        validators[channel_of(message.topic)].validate(message.body)
        assert not validators[channel_of(message.topic)].is_valid({**message.body, "surplus": 1})


def test_messages_are_delivered_as_the_bindings_say(wire: Wire) -> None:
    bindings = {
        operation["channel"]["$ref"].split("/")[-1]: operation["bindings"]["mqtt"]
        for operation in ASYNCAPI["operations"].values()
        if operation["action"] == "send"
    }
    for message in wire.said:
        assert bindings[channel_of(message.topic)]["qos"] == message.qos
    assert all(message.retained for message in wire.kept)
    assert {channel_of(message.topic) for message in wire.kept} == {
        key for key, binding in bindings.items() if binding["retain"]
    }


def test_the_will_is_where_the_server_binding_says(wire: Wire) -> None:
    will = ASYNCAPI["servers"]["broker"]["bindings"]["mqtt"]["lastWill"]
    (topic,) = {m.topic for m in wire.said if m.topic.endswith("health")}
    assert will == {"topic": topic.replace(ROOT, "{root}"), "qos": 1, "retain": True}


def test_the_documents_say_which_version_of_the_messages_they_describe() -> None:
    assert ASYNCAPI["info"]["version"] == str(messages.SCHEMA)
    assert SCHEMAS["alert"]["properties"]["schema"]["const"] == messages.SCHEMA
