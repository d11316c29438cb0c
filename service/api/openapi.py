"""The API definition: OpenAPI 3.1, put together from what stands beside the handlers."""

import inspect
from collections.abc import Iterable, Mapping
from typing import Any

from fastapi.routing import APIRoute
from starlette.routing import BaseRoute

from service import __version__
from service.api import schemas
from service.api.media import JSON_TYPE
from service.processes.base import JSON, Process

EXAMPLE_BASE = "http://127.0.0.1:8000"

_DESCRIPTION = """\
Posts a plane domain, gets back proved two-sided enclosures of constants of functional analysis.

The outer shape is OGC API – Processes, Part 1: Core 1.0. Errors are problem documents (RFC 9457), sent as
`application/problem+json`, or as `application/json` to a client whose `Accept` prefers that. `HEAD` is
answered wherever `GET` is. Inputs by reference are read from data: URLs only."""


def document(
    routes: Iterable[BaseRoute], processes: Mapping[str, Process], examples: Mapping[str, JSON], base: str
) -> JSON:
    """OpenAPI 3.1 of an application.

    routes : those of the application; each described one has its operation in ``openapi_extra``.
    examples : execution requests by name, the id of the process before the first dot.
    base : root of the service, without a slash at the end.
    """
    paths: dict[str, JSON] = {}
    for route in routes:
        if isinstance(route, APIRoute) and route.openapi_extra is not None:
            for method in sorted(route.methods or ()):
                paths.setdefault(route.path, {})[method.lower()] = _operation(route, examples)
    components = {**schemas.FIXED, **schemas.of_processes(processes)}
    return {
        "openapi": "3.1.0",
        "info": {
            "title": "Wellposed",
            "version": __version__,
            "description": _DESCRIPTION,
            "license": {"name": "GPL-3.0-or-later", "identifier": "GPL-3.0-or-later"},
        },
        "servers": [{"url": base}],
        "paths": paths,
        "components": {"schemas": {name: _lifted(schema) for name, schema in components.items()}},
    }


def _operation(route: APIRoute, examples: Mapping[str, JSON]) -> JSON:
    summary, _, description = inspect.cleandoc(route.endpoint.__doc__ or "").partition("\n\n")
    described: JSON = {"summary": summary}
    if description:
        described["description"] = " ".join(description.split())
    described |= route.openapi_extra or {}
    if "requestBody" in described and examples:
        body = described["requestBody"]
        shown = {
            name.replace(".", "-"): {"summary": name.partition(".")[2], "value": example}
            for name, example in examples.items()
        }
        content = {JSON_TYPE: {**body["content"][JSON_TYPE], "examples": shown}}
        described["requestBody"] = {**body, "content": content}
    return described


def _lifted(schema: Any) -> Any:
    """Process descriptions say ``nullable``, which JSON Schema 2020-12 does not know."""
    if isinstance(schema, list):
        return [_lifted(item) for item in schema]
    if not isinstance(schema, dict):
        return schema
    lifted = {name: _lifted(value) for name, value in schema.items()}
    if lifted.get("nullable") is True and isinstance(lifted.get("type"), str):
        del lifted["nullable"]
        lifted["type"] = [lifted["type"], "null"]
    return lifted
