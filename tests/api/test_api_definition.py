"""The API definition: valid in both versions, complete, and true."""

from typing import Any

import httpx
import pytest
from jsonschema import Draft202012Validator
from openapi_spec_validator import OpenAPIV30SpecValidator, OpenAPIV31SpecValidator
from openapi_spec_validator.validation.exceptions import OpenAPIValidationError

from service.api.openapi30 import downgrade, schema


def test_both_versions_are_valid(client: httpx.Client) -> None:
    lower, upper = client.get("/api").json(), client.get("/openapi.json").json()
    assert lower["openapi"] == "3.0.3"
    assert upper["openapi"].startswith("3.1")
    OpenAPIV30SpecValidator(lower).validate()
    OpenAPIV31SpecValidator(upper).validate()
    with pytest.raises(OpenAPIValidationError, match="identifier"):
        OpenAPIV30SpecValidator({**upper, "openapi": "3.0.3"}).validate()


def test_both_versions_describe_the_same_operations(client: httpx.Client) -> None:
    lower, upper = client.get("/api").json(), client.get("/openapi.json").json()

    def outline(document: dict[str, Any]) -> dict[tuple[str, str], list[str]]:
        return {
            (path, method): sorted(operation["responses"])
            for path, methods in document["paths"].items()
            for method, operation in methods.items()
        }

    assert outline(lower) == outline(upper)
    assert len(outline(upper)) == 15
    identifiers = [
        operation["operationId"] for methods in upper["paths"].values() for operation in methods.values()
    ]
    assert len(set(identifiers)) == len(identifiers)


def test_every_operation_says_what_it_is_for(client: httpx.Client) -> None:
    for path, methods in client.get("/openapi.json").json()["paths"].items():
        for operation in methods.values():
            assert operation["summary"]
            assert operation["tags"]
            assert set(operation["responses"]) & {"200", "201"}
            named = {each["name"] for each in operation.get("parameters", []) if each["in"] == "path"}
            assert named == {part.strip("{}") for part in path.split("/") if part.startswith("{")}


def test_requests_are_described_as_they_are_taken(client: httpx.Client) -> None:
    document = client.get("/openapi.json").json()
    check = Draft202012Validator(
        {"$ref": "#/components/schemas/echo.execute", "components": document["components"]}
    )
    bare = {"title": "a"}
    for good in (
        {"inputs": {"problem": bare}},
        {"inputs": {"problem": {"value": bare, "mediaType": "application/json"}, "seconds": 0.1}},
        {"inputs": {"problem": {"href": "data:,{}"}, "seconds": {"value": 0.1}}, "response": "document"},
        {"inputs": {"problem": bare}, "outputs": {"result": {"transmissionMode": "value"}}},
    ):
        check.validate(good)
        assert client.post("/processes/echo/execution", json=good).status_code == 200
    for bad in (
        {},
        {"inputs": {"problem": bare, "other": 1}},
        {"inputs": {"problem": bare}, "response": "xml"},
        {"inputs": {"problem": bare}, "subscriber": {}},
        {"inputs": {"problem": bare}, "outputs": {"other": {}}},
    ):
        assert not check.is_valid(bad)


@pytest.mark.parametrize(
    ("newer", "older"),
    [
        ({"type": ["string", "null"]}, {"type": "string", "nullable": True}),
        ({"type": ["string", "integer"]}, {"anyOf": [{"type": "string"}, {"type": "integer"}]}),
        (
            {"anyOf": [{"type": "string"}, {"type": "null"}]},
            {"anyOf": [{"type": "string"}], "nullable": True},
        ),
        ({"const": 3}, {"enum": [3]}),
        ({"exclusiveMinimum": 0}, {"minimum": 0, "exclusiveMinimum": True}),
        ({"exclusiveMaximum": 1.5}, {"maximum": 1.5, "exclusiveMaximum": True}),
        ({"examples": [1, 2]}, {"example": 1}),
        ({"type": "array", "prefixItems": [{}]}, {"type": "array", "items": {}}),
        ({"properties": {"const": {"const": 1}}}, {"properties": {"const": {"enum": [1]}}}),
        ({"items": {"type": ["number", "null"]}}, {"items": {"type": "number", "nullable": True}}),
        ({"additionalProperties": False}, {"additionalProperties": False}),
        ({"additionalProperties": {"const": 1}}, {"additionalProperties": {"enum": [1]}}),
        (
            {"$ref": "#/x", "description": "y"},
            {"description": "y", "allOf": [{"$ref": "#/x"}]},
        ),
        ({"$ref": "#/x"}, {"$ref": "#/x"}),
        (True, {}),
    ],
)
def test_schemas_in_the_older_dialect(newer: Any, older: Any) -> None:
    assert schema(newer) == older


def test_examples_are_data_and_stay_as_they_are() -> None:
    example = {"schema": {"const": 1}, "type": ["string", "null"]}
    document = {
        "openapi": "3.1.0",
        "info": {"title": "x", "version": "1", "license": {"name": "y", "identifier": "z"}},
        "paths": {"/": {"post": {"requestBody": {"content": {"application/json": {
            "schema": {"const": 1}, "examples": {"one": {"value": example}}}}}}}},
    }  # fmt: skip
    content = downgrade(document)["paths"]["/"]["post"]["requestBody"]["content"]["application/json"]
    assert content["schema"] == {"enum": [1]}
    assert content["examples"]["one"]["value"] == example
    assert downgrade(document)["info"]["license"] == {"name": "y"}
