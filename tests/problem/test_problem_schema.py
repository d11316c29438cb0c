"""The published schemas: of the closed dialect, and of one mind with the readers about the form."""

import copy
import random

import jsonschema
import pytest
from problem_documents import KNOWN, SQUARE, faults, full, inputs, multi, part, polygon
from test_problem_fuzz import SEEDS, damage
from test_request_faults import FORM, changed
from test_request_reading import DOCUMENTS, SAME

from service.problem.schema import EXAMPLE, input_descriptions

DESCRIPTIONS = input_descriptions(KNOWN)

WHOLE = {
    "type": "object",
    "properties": {name: description["schema"] for name, description in DESCRIPTIONS.items()},
    "required": [name for name, description in DESCRIPTIONS.items() if description.get("minOccurs", 1)],
    "additionalProperties": False,
}
"""The inputs object, as a server that goes by the description would check it."""

DRAFTS = (jsonschema.Draft4Validator, jsonschema.Draft202012Validator)
"""The dialect must mean the same in both."""

DIALECT = {
    *("title", "description", "default", "example", "type", "enum", "format", "nullable", "deprecated"),
    *("multipleOf", "minimum", "maximum", "exclusiveMinimum", "exclusiveMaximum"),
    *("minLength", "maxLength", "pattern", "items", "minItems", "maxItems", "uniqueItems"),
    *("properties", "required", "additionalProperties", "minProperties", "maxProperties"),
    *("allOf", "oneOf", "anyOf", "not", "readOnly", "writeOnly"),
    *("contentMediaType", "contentEncoding", "contentSchema"),
}
"""The members that schema.yaml of OGC API - Processes 1.0 (OGC 18-062r2) allows in a schema."""

TYPES = {"array", "boolean", "integer", "number", "object", "string"}


def accepts(document):
    verdicts = {draft(WHOLE).is_valid(document) for draft in DRAFTS}
    assert len(verdicts) == 1
    return verdicts.pop()


def schemas(schema):
    yield schema
    for inner in (
        *schema.get("properties", {}).values(),
        *schema.get("oneOf", ()),
        *([schema["items"]] if "items" in schema else ()),
    ):
        yield from schemas(inner)


@pytest.mark.parametrize("name", DESCRIPTIONS)
def test_schemas_keep_to_the_closed_dialect(name):
    for schema in schemas(DESCRIPTIONS[name]["schema"]):
        assert set(schema) <= DIALECT
        assert schema.get("type", "object") in TYPES
        assert ("type" in schema) != ("oneOf" in schema)
        assert schema.get("type") != "object" or schema["additionalProperties"] is False
    for draft in DRAFTS:
        draft.check_schema(DESCRIPTIONS[name]["schema"])


@pytest.mark.parametrize("name", DESCRIPTIONS)
def test_every_input_is_described(name):
    description = DESCRIPTIONS[name]
    assert description["title"]
    assert description["description"]
    assert description["schema"]["title"]
    assert description["schema"]["description"]
    assert jsonschema.Draft202012Validator(description["schema"]).is_valid(description["schema"]["example"])


def test_the_example_is_accepted():
    assert accepts({"problem": EXAMPLE})
    assert faults({"problem": EXAMPLE}) == []


@pytest.mark.parametrize("document", [*DOCUMENTS.values(), *(inputs(shape) for shape in SAME)])
def test_what_the_reader_accepts_the_schema_accepts(document):
    assert faults(document) == []
    assert accepts(document)


BEYOND = ("Selects nothing", "Overlaps", "remainder already", "leave nothing", "same name")
BEYOND += (
    "repeats",
    "more than 1e+06",
    "comes first",
    "single point",
    "shorter",
    "crosses",
    "touches itself",
)
BEYOND += ("turns back", "encloses no area", "comes closer", "different vertices", "runs along", "run along")
BEYOND += ("does not lie inside", "overlap", "must end with", "altitude", "asked for already")
BEYOND += ("at most 33333 rings", "must extend", "opposite corner")
BEYOND += ("At character", "with a space on both sides", "must lie between", "has this name", "never be used")
BEYOND += ("must have no region", "no area in common", "falls into", "cannot be told apart", "could not be proved")
BEYOND += ("does not exist", "must be positive", "must be 3 vectors", "on one line", "more than 1e+06 times")
"""Faults that a schema cannot express, by what their sentences say."""


def form_is_wrong(found):
    return any(not any(words in detail for words in BEYOND) for _, detail in found)


def plain(value):
    """Whether JSON can express a value: no NaN, no infinities, no lone surrogates (RFC 8259)."""
    if isinstance(value, dict):
        return all(plain(key) and plain(item) for key, item in value.items())
    if isinstance(value, list):
        return all(plain(item) for item in value)
    if isinstance(value, float):
        return abs(value) < float("inf")
    return not isinstance(value, str) or "\ud800" not in value


CASES = [case for case in FORM if plain(changed(case[0], case[1])) and len(repr(case[1])) < 10_000]


@pytest.mark.parametrize(("path", "value", "pointer"), CASES)
def test_reader_and_schema_agree_on_the_form(path, value, pointer):
    document = changed(path, value)
    found = faults(document)
    assert found
    if form_is_wrong(found):
        assert not accepts(document)


@pytest.mark.parametrize("seed", range(6))
def test_reader_and_schema_agree_on_damaged_documents(seed):
    """What the schema refuses the reader refuses; what the reader refuses for its form the schema does."""
    choose = random.Random(100 + seed)
    refused = 0
    for _ in range(60):
        document = copy.deepcopy(choose.choice(SEEDS))
        damage(document, choose)
        if not plain(document):
            continue
        found = faults(document)
        if accepts(document):
            assert not form_is_wrong(found), found
        else:
            refused += 1
            assert found
    assert refused > 20


def test_caps_and_constants_are_published():
    schema = input_descriptions(["poincare", "friedrichs"])
    assert schema["constants"]["schema"]["items"]["enum"] == ["friedrichs", "poincare"]
    assert schema["limits"]["schema"]["properties"]["seconds"]["default"] == 60
    assert schema["tolerance"]["schema"]["default"] == 0.001


def test_a_document_of_each_shape_matches_one_alternative_only():
    shape = next(s for s in schemas(WHOLE) if s.get("title") == "Shape")
    documents = [
        {"rectangle": {"corner": [0, 0], "size": [1, 1]}},
        polygon(SQUARE),
        {"type": "Polygon", "coordinates": [[*SQUARE, SQUARE[0]]]},
        multi([SQUARE]),
    ]
    for number, document in enumerate(documents):
        validators = [jsonschema.Draft202012Validator(choice) for choice in shape["oneOf"]]
        assert [v.is_valid(document) for v in validators] == [i == number for i in range(4)]
    assert accepts(full())
    assert not accepts({**full(), "extra": part("x", "remainder")})
