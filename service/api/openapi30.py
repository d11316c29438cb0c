"""Turns an OpenAPI 3.1 document into 3.0.3, for clients that know only that."""

from typing import Any

from service.processes.base import JSON

_SCHEMA_MAPS = ("properties",)
_SCHEMA_LISTS = ("allOf", "anyOf", "oneOf")
_UNKNOWN = (
    "$comment",
    "$schema",
    "contentEncoding",
    "contentMediaType",
    "contentSchema",
    "patternProperties",
)


def downgrade(document: JSON) -> JSON:
    """The same API in OpenAPI 3.0.3; what that version cannot say is left out or said more loosely."""
    info = dict(document["info"])
    info.pop("summary", None)
    if "license" in info:
        info["license"] = {name: value for name, value in info["license"].items() if name != "identifier"}
    lowered = {
        name: _searched(value)
        for name, value in document.items()
        if name not in ("openapi", "info", "webhooks", "jsonSchemaDialect", "components")
    }
    components = document.get("components", {})
    return {
        "openapi": "3.0.3",
        "info": info,
        **lowered,
        "components": {
            **{name: _searched(value) for name, value in components.items() if name != "schemas"},
            "schemas": {name: schema(value) for name, value in components.get("schemas", {}).items()},
        },
    }


def _searched(value: Any) -> Any:
    """Outside schemas nothing changes but the schemas found there; examples are data and stay."""
    if isinstance(value, list):
        return [_searched(item) for item in value]
    if not isinstance(value, dict):
        return value
    return {
        name: schema(item)
        if name == "schema"
        else item
        if name in ("example", "examples")
        else _searched(item)
        for name, item in value.items()
    }


def schema(value: Any) -> Any:
    """One JSON Schema 2020-12 as a 3.0 schema object."""
    if isinstance(value, bool):
        return {} if value else {"not": {}}
    if not isinstance(value, dict):
        return value
    if "$ref" in value:
        # Siblings of a reference are ignored in 3.0; allOf keeps them.
        siblings = {name: item for name, item in value.items() if name != "$ref"}
        return {**schema(siblings), "allOf": [{"$ref": value["$ref"]}]} if siblings else value
    lowered: JSON = {}
    for name, item in value.items():
        if name in _SCHEMA_MAPS:
            lowered[name] = {key: schema(member) for key, member in item.items()}
        elif name in _SCHEMA_LISTS:
            lowered[name] = [schema(member) for member in item]
        elif name in ("items", "additionalProperties", "not"):
            lowered[name] = (
                item if name == "additionalProperties" and isinstance(item, bool) else schema(item)
            )
        elif name == "const":
            lowered["enum"] = [item]
        elif name == "examples":
            lowered["example"] = item[0]
        elif name == "prefixItems":
            lowered.setdefault("items", {})
        elif name not in _UNKNOWN:
            lowered[name] = item
    _lower_types(lowered)
    _lower_bounds(lowered)
    return lowered


def _lower_types(lowered: JSON) -> None:
    kinds = lowered.get("type")
    if isinstance(kinds, list):
        named = [kind for kind in kinds if kind != "null"]
        del lowered["type"]
        if len(named) == 1:
            lowered["type"] = named[0]
        else:
            lowered["anyOf"] = [{"type": kind} for kind in named]
        if len(named) < len(kinds):
            lowered["nullable"] = True
    elif kinds == "null":
        lowered["enum"], lowered["nullable"] = [None], True
        del lowered["type"]
    for name in ("anyOf", "oneOf"):
        choices = lowered.get(name, [])
        other = [choice for choice in choices if choice.get("enum") != [None]]
        if len(other) < len(choices):
            lowered[name], lowered["nullable"] = other, True


def _lower_bounds(lowered: JSON) -> None:
    for bound, exclusive in (("minimum", "exclusiveMinimum"), ("maximum", "exclusiveMaximum")):
        limit = lowered.get(exclusive)
        if isinstance(limit, int | float) and not isinstance(limit, bool):
            lowered[bound], lowered[exclusive] = limit, True
