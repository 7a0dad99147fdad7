"""What other programs may rely on: JSON Schema of every payload, and an AsyncAPI document.

Knows the payloads' types, their topics and how they are delivered. Must not know a configuration:
both documents are the same for every line.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

from pydantic import ConfigDict, TypeAdapter, with_config
from pydantic.json_schema import GenerateJsonSchema
from typing_extensions import is_typeddict

from monitor import messages
from monitor.messages import (
    SCHEMA,
    AlertEvent,
    BaselineMessage,
    HealthMessage,
    PointMessage,
    SetAsideMessage,
    StandingMessage,
)

Document = dict[str, Any]

_DIALECT = "https://json-schema.org/draft/2020-12/schema"
_BINDING = "0.2.0"  # of AsyncAPI's bindings for MQTT
_PARAMETER = re.compile(r"{(\w+)}")
_LINE_BREAK = re.compile(r"(?<!\n)\n(?!\n)")

# Set from here, so that the daemon's messages need no pydantic.
for _each in vars(messages).values():
    if is_typeddict(_each):
        with_config(ConfigDict(extra="forbid", use_attribute_docstrings=True))(_each)


@dataclass(frozen=True, slots=True)
class Kind:
    """A kind of message; its name is its topic's level below the root."""

    name: str
    payload: type
    title: str
    retained: bool
    of_stream: bool
    """Whether the topic goes on with a characteristic and the values of a stream."""


KINDS = (
    Kind("alert", AlertEvent, "Alert event", retained=False, of_stream=True),
    Kind("standing", StandingMessage, "Standing of a stream", retained=True, of_stream=True),
    Kind("baseline", BaselineMessage, "Proposed baseline", retained=True, of_stream=True),
    Kind("point", PointMessage, "Point of a stream", retained=False, of_stream=True),
    Kind("health", HealthMessage, "Health of the daemon", retained=True, of_stream=False),
    Kind("setaside", SetAsideMessage, "Set-aside notice", retained=False, of_stream=False),
)


# ── JSON Schema ──────────────────────────────────────────────────────────────────────────────────


def json_schemas() -> dict[str, Document]:
    """A complete JSON Schema (2020-12) for each kind of message, by the kind's name."""
    return {kind.name: _json_schema(kind) for kind in KINDS}


class _Generator(GenerateJsonSchema):
    """Leaves out the titles that only repeat the fields' names."""

    def field_title_should_be_set(self, schema: object) -> bool:
        return False


def _json_schema(kind: Kind) -> Document:
    adapter: TypeAdapter[Any] = TypeAdapter(kind.payload)
    schema: Document = {
        **_reflowed(adapter.json_schema(mode="serialization", schema_generator=_Generator)),
        "$schema": _DIALECT,
        "$id": f"urn:driftbell:schema:{SCHEMA}:{kind.name}",
        "title": kind.title,
    }
    return {key: schema[key] for key in ("$schema", "$id", "title", "description", *schema)}


def _reflowed(schema: Any) -> Any:
    """The same with its descriptions, which were docstrings, in CommonMark."""
    if isinstance(schema, list):
        return [_reflowed(each) for each in schema]
    if not isinstance(schema, dict):
        return schema
    return {
        key: _common_mark(value)
        if key == "description" and isinstance(value, str)
        else _reflowed(value)
        for key, value in schema.items()
    }


def _common_mark(text: str) -> str:
    """A line for each paragraph, and code between single backticks."""
    return _LINE_BREAK.sub(" ", text).replace("``", "`")


# ── AsyncAPI ─────────────────────────────────────────────────────────────────────────────────────

_INFO = """\
Watches in-line gauges over MQTT and rings when, and only when, something has changed.

All topics begin with one root, `outputs.root` of the configuration. Subscribe to `<root>/alert/#`
for what people should hear of, to `<root>/standing/#` for how every stream stands, and to
`<root>/health` for whether anyone is watching at all. Payloads are JSON (UTF-8), published at
QoS 1; times are ISO 8601 in UTC.

An advisory system: neither a safety function nor an instrument that is legal for trade."""

_PARAMETERS: Document = {
    "root": {
        "description": "`outputs.root` of the configuration: one topic level or several.",
        "examples": ["plant/jar-line-2/monitor"],
    },
    "characteristic": {
        "description": "The characteristic's name in the configuration.",
        "examples": ["net-weight"],
        "location": "$message.payload#/characteristic",
    },
    "stream": {
        "description": "The values of the stream's keys, sorted by key, each percent-encoded"
        ' (RFC 3986) and a topic level of its own: `{"lane": "1", "head": "4"}` gives `4/1`.'
        " A characteristic without stream keys has no such levels.",
        "examples": ["4/1"],
    },
}


def asyncapi() -> Document:
    """An AsyncAPI 3.0 document of what the daemon sends.

    Its schemas are AsyncAPI's own, an extension of JSON Schema draft 7, since few tools read any
    other in it: the types need nothing that draft 7 lacks.
    """
    schemas = _component_schemas()
    channels = [(key, kind, at) for kind in KINDS for key, at in _addresses(kind).items()]
    return {
        "asyncapi": "3.0.0",
        "id": "urn:driftbell",
        "info": {
            "title": "driftbell",
            "version": str(SCHEMA),
            "description": _common_mark(_INFO),
        },
        "defaultContentType": "application/json",
        "servers": {
            "broker": _server("mqtt", 1883, "The broker that the configuration names."),
            "broker-tls": _server("secure-mqtt", 8883, "The same, over TLS."),
        },
        "channels": {key: _channel(kind, address) for key, kind, address in channels},
        "operations": {
            f"send{key[0].upper()}{key[1:]}": _operation(kind, key) for key, kind, _ in channels
        },
        "components": {
            "parameters": _PARAMETERS,
            "messages": {kind.name: _message(kind, schemas) for kind in KINDS},
            "schemas": schemas,
        },
    }


def _component_schemas() -> Document:
    inputs: list[tuple[str, Any, TypeAdapter[Any]]] = [
        (kind.name, "serialization", TypeAdapter(kind.payload)) for kind in KINDS
    ]
    _, schemas = TypeAdapter.json_schemas(
        inputs, schema_generator=_Generator, ref_template="#/components/schemas/{model}"
    )
    return {name: _reflowed(schema) for name, schema in schemas["$defs"].items()}


def _addresses(kind: Kind) -> dict[str, str]:
    """The topics of a kind, by channel."""
    topic = f"{{root}}/{kind.name}"
    if not kind.of_stream:
        return {kind.name: topic}
    return {
        kind.name: f"{topic}/{{characteristic}}",
        f"{kind.name}OfStream": f"{topic}/{{characteristic}}/{{stream}}",
    }


def _channel(kind: Kind, address: str) -> Document:
    return {
        "address": address,
        "messages": {kind.name: {"$ref": f"#/components/messages/{kind.name}"}},
        "parameters": {
            name: {"$ref": f"#/components/parameters/{name}"}
            for name in _PARAMETER.findall(address)
        },
    }


def _operation(kind: Kind, channel: str) -> Document:
    return {
        "action": "send",
        "channel": {"$ref": f"#/channels/{channel}"},
        "messages": [{"$ref": f"#/channels/{channel}/messages/{kind.name}"}],
        "bindings": {"mqtt": {"qos": 1, "retain": kind.retained, "bindingVersion": _BINDING}},
    }


def _message(kind: Kind, schemas: Document) -> Document:
    form = kind.payload.__name__
    return {
        "name": kind.name,
        "title": kind.title,
        "summary": schemas[form]["description"].partition("\n\n")[0],
        "payload": {"$ref": f"#/components/schemas/{form}"},
    }


def _server(protocol: str, port: int, description: str) -> Document:
    return {
        "host": "{host}:{port}",
        "protocol": protocol,
        "description": description,
        "variables": {
            "host": {"default": "localhost", "description": "`broker.host` of the configuration."},
            "port": {"default": str(port), "description": "`broker.port` of the configuration."},
        },
        "bindings": {
            "mqtt": {
                "cleanSession": False,
                "lastWill": {"topic": "{root}/health", "qos": 1, "retain": True},
                "bindingVersion": _BINDING,
            }
        },
    }
